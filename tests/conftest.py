"""Settings shared by all tests: one BLAS thread, so that results do not depend on the machine."""

import os

for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(name, "1")

import matplotlib  # noqa: E402 - the thread settings must come first

matplotlib.use("Agg")
