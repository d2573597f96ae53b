"""The review: what a person must know before using the numbers of a job."""
