"""Imported before anything that counts: libraries read these when they are loaded."""

import os

for _library in ("OPENBLAS", "OMP", "MKL", "NUMBA"):
    os.environ.setdefault(f"{_library}_NUM_THREADS", "1")
