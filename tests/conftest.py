"""One BLAS thread in every process of the tests, set before numpy is loaded: the workers share the cores already."""

import os

os.environ.update(OPENBLAS_NUM_THREADS="1", OMP_NUM_THREADS="1")
