"""What the benchmarks share."""

import os

# One thread, as in the workers: the many small fronts run slower with two.
CHILD_ENVIRONMENT = {
    **os.environ,
    "OMP_NUM_THREADS": "1",
    "OPENBLAS_NUM_THREADS": "1",
    "MKL_NUM_THREADS": "1",
}
