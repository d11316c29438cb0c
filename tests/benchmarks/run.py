"""Runs one of the benchmarks in a child process with one thread, as the service runs its work, by hand:

python tests/benchmarks/run.py against_plain_script
python tests/benchmarks/run.py growth
"""

import os
import subprocess
import sys
from pathlib import Path

HERE = Path(__file__).resolve().parent

BENCHMARKS = ("against_plain_script", "growth")


def environment() -> dict[str, str]:
    """One thread in linear algebra; the service and the shapes of the tests importable."""
    threads = {f"{library}_NUM_THREADS": "1" for library in ("OMP", "OPENBLAS", "MKL")}
    paths = os.pathsep.join(str(path) for path in (HERE.parents[1], HERE.parent / "external"))
    return {**os.environ, **threads, "PYTHONPATH": paths}


def main() -> int:
    """The child's status."""
    if len(sys.argv) != 2 or sys.argv[1] not in BENCHMARKS:
        print(__doc__)
        return 2
    return subprocess.run([sys.executable, HERE / f"{sys.argv[1]}.py"], env=environment(), check=False).returncode


if __name__ == "__main__":
    sys.exit(main())
