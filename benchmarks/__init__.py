"""Benchmarks of realize, on one BLAS thread. Run from the root of the source tree with ``-m``."""

import os
import sys

_THREADS = "OPENBLAS_NUM_THREADS"

# OpenBLAS reads the variable when it is loaded, so it must be set before numpy is.
if os.environ.setdefault(_THREADS, "1") != "1":
    sys.exit(f"benchmarks: {_THREADS} is {os.environ[_THREADS]!r}; wanted 1, or leave it unset")
if "numpy" in sys.modules:
    sys.exit("benchmarks: numpy is loaded already; run them in a process of their own")
