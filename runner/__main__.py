"""Entry point: catches everything, imports included. An uncaught fault of the program exits 70, never 1."""

import errno
import os
import sys
from contextlib import suppress

from runner import threads
from runner.exits import Exit

UNWRITABLE = frozenset({errno.ENOSPC, errno.EDQUOT, errno.EIO})


def main() -> None:
    """Run the command line and end with one of the exit codes of `runner.exits`."""
    threads.one_each()
    code = Exit.FAULT
    try:
        from runner import cli  # noqa: PLC0415 - a broken installation must exit 70 as well

        code = cli.run(sys.argv[1:])
        sys.stdout.flush()
    except BrokenPipeError:  # whoever read the lines has gone; what was found still holds
        _hush()
    except KeyboardInterrupt:
        code = Exit.INTERRUPTED
        with suppress(OSError):
            print("interrupted", file=sys.stderr)
    except Exception as error:  # noqa: BLE001 - the last net
        code = Exit.FAULT
        with suppress(OSError):  # the disk on which the lines are kept may be what is full
            _tell(error)
        _hush()
    sys.exit(int(code))


def _tell(error: Exception) -> None:
    import traceback  # noqa: PLC0415

    if isinstance(error, OSError) and error.filename is None and error.errno in UNWRITABLE:
        print(f"probatum: its lines cannot be written: {error.strerror}", file=sys.stderr)
        return
    traceback.print_exc()
    print(f"probatum: a fault of the program: {type(error).__name__}: {error}", file=sys.stderr)


def _hush() -> None:
    """Let nothing that could not be written fail once more when the process ends, which would change the exit code."""
    with suppress(OSError):
        sys.stdout.flush()
        return
    with suppress(OSError, ValueError):
        nowhere = os.open(os.devnull, os.O_WRONLY)
        os.dup2(nowhere, sys.stdout.fileno())


if __name__ == "__main__":
    main()
