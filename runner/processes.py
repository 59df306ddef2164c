"""Worker processes: all forked from one that has loaded the program once, with one numeric thread each.

Loading the program with its libraries takes more than a second. One process does it while the run begins; each worker
is then there at once and shares the loaded libraries' memory.
"""

import os
import threading
from collections.abc import Callable
from concurrent.futures import ProcessPoolExecutor
from multiprocessing import connection, forkserver, get_all_start_methods, get_context, parent_process
from typing import Any

from runner import threads
from runner.exits import Exit

_HOW = "forkserver" if "forkserver" in get_all_start_methods() else "spawn"
_LOADED = "runner.worker"
"""Module that loads what workers need."""
_SAFE_PATH = "PYTHONSAFEPATH"
"""Keeps a stranger's module of the same name in the present folder from being loaded in place of the program's."""


def warm_up() -> None:
    """Start loading what workers need, and return at once."""
    threads.one_each()
    if _HOW != "forkserver":
        return
    before = os.environ.get(_SAFE_PATH)
    os.environ[_SAFE_PATH] = "1"
    try:
        get_context(_HOW).set_forkserver_preload([_LOADED])
        forkserver.ensure_running()
    finally:
        if before is None:
            del os.environ[_SAFE_PATH]
        else:
            os.environ[_SAFE_PATH] = before


def pool(jobs: int, prepare: Callable[..., None] | None = None, *arguments: Any) -> ProcessPoolExecutor:
    """Return worker processes, each prepared by a function of a module with these arguments, if one is given.

    Args:
        jobs: How many.
        prepare: Is called once in each worker, with this process's environment in force.
        arguments: Its arguments; they travel between processes.
    """
    warm_up()
    return ProcessPoolExecutor(jobs, get_context(_HOW), _begin, (dict(os.environ), prepare, *arguments))


def _begin(environment: dict[str, str], prepare: Callable[..., None] | None, *arguments: Any) -> None:
    threading.Thread(target=_end_with_the_run, daemon=True).start()
    os.environ.clear()  # that of the process which loaded the program may be older than this run
    os.environ.update(environment)
    if prepare is not None:
        prepare(*arguments)


def _end_with_the_run() -> None:
    """Wait until the process that gives the work is gone, then end: else a killed run leaves its workers for ever."""
    run = parent_process()
    if run is not None:
        connection.wait([run.sentinel])
        os._exit(int(Exit.INTERRUPTED))
