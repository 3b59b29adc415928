"""Run every benchmark: `python -m tests.benchmarks` at the top of the checkout."""

from __future__ import annotations

import os
import sys
from pathlib import Path

# One thread for each side. This has to be said before NumPy is loaded.
for _variable in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[_variable] = "1"

ROOT = Path(__file__).resolve().parents[2]
# Helpers of the tests are found as pytest finds them.
sys.path[:0] = [str(ROOT / "tests"), str(ROOT / "tests" / "kernels")]

if __name__ == "__main__":
    from .report import main

    main(ROOT / "docs" / "benchmarks.md")
