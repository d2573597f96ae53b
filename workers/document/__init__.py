"""The job document: JSON in, a `Job` out, or every fault it has."""
