"""Imported before numpy, this keeps its linear algebra on one thread."""

import os

THREADS = 1
for _name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[_name] = str(THREADS)
