"""One numeric thread a process: sums over several are rounded in another order, and no result may depend on cores."""

import os

NAMES = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "NUMEXPR_NUM_THREADS")
"""What the numeric libraries ask when they are first imported."""


def one_each() -> None:
    """Give this process, before it imports numpy, and all that it starts one thread; `--jobs` uses the cores."""
    os.environ |= dict.fromkeys(NAMES, "1")
