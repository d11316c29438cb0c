"""For all tests: one thread per process in linear algebra, as in the service; set before NumPy is loaded."""

import os

for _library in ("OMP", "OPENBLAS", "MKL"):
    os.environ.setdefault(f"{_library}_NUM_THREADS", "1")
