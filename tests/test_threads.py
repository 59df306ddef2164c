"""However many threads the surroundings ask for, a process of the program takes one."""

import os
import subprocess
import sys
from pathlib import Path

from runner.threads import NAMES, one_each

ASKS = """
import sys
from runner import __main__ as entry
assert "numpy" not in sys.modules
sys.argv = ["probatum", "--version"]
try:
    entry.main()
except SystemExit:
    pass
import numpy, os
numpy.ones((500, 500)) @ numpy.ones((500, 500))
print(len(os.listdir("/proc/self/task")))
"""


def test_the_program_takes_one_thread_before_numpy_is_there() -> None:
    """Asked for four by the environment, a process that runs the program multiplies with one."""
    environment = os.environ | dict.fromkeys(NAMES, "4")
    root = Path(__file__).resolve().parent.parent
    done = subprocess.run(
        [sys.executable, "-c", ASKS], cwd=root, env=environment, capture_output=True, text=True, check=True
    )

    assert done.stdout.splitlines()[-1] == "1"


def test_everything_started_later_inherits_it() -> None:
    """Worker processes read the same variables."""
    one_each()

    assert {os.environ[name] for name in NAMES} == {"1"}
