"""Entry point: catches everything, imports included. An uncaught fault of the program exits 70, never 1."""

import sys

from runner import threads
from runner.exits import Exit


def main() -> None:
    """Run the command line and end with one of the exit codes of `runner.exits`."""
    threads.one_each()
    try:
        from runner import cli  # noqa: PLC0415 - a broken installation must exit 70 as well

        sys.exit(int(cli.run(sys.argv[1:])))
    except KeyboardInterrupt:
        print("interrupted", file=sys.stderr)
        sys.exit(int(Exit.INTERRUPTED))
    except Exception as error:  # noqa: BLE001 - the last net
        import traceback  # noqa: PLC0415

        traceback.print_exc()
        print(f"probatum: a fault of the program: {type(error).__name__}: {error}", file=sys.stderr)
        sys.exit(int(Exit.FAULT))


if __name__ == "__main__":
    main()
