"""The command line: arguments only. A command's module is loaded when it is called."""

import importlib
import sys
from collections.abc import Sequence

import click

import runner
from runner.errors import ProbatumError, StorageError, VerificationRefused
from runner.exits import Exit

COMMANDS = {
    "run": "Judge every unit found under FRAMES; write reports.",
    "check": "Read specs, list every complaint with line and column.",
    "verify": "Check reports: signature, integrity, verdicts; with --frames measure again.",
    "demo": "Make an invented lot of board cameras and run the job on it.",
    "schema": "Print the JSON Schema of test specs, for editors.",
    "targets": "List the targets, or tell about one.",
    "methods": "List the methods, or tell about one.",
    "chart": "Check chart files; draw their artwork 1:1.",
    "keys": "Make keys that sign reports.",
}
"""Verb and its one line for `--help`; the module of the same name in `runner.commands` holds the command."""


class _Verbs(click.Group):
    """Loads a verb's module only when it is called, so that `--help` answers at once."""

    def list_commands(self, ctx: click.Context) -> list[str]:  # noqa: ARG002 - click's form
        """List the verbs in the order of use."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:  # noqa: ARG002 - click's form
        """Load a verb."""
        if cmd_name not in COMMANDS:
            return None
        command: click.Command = importlib.import_module(f"runner.commands.{cmd_name}").command
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:  # noqa: ARG002
        """Write the verbs without loading any."""
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))


@click.group(cls=_Verbs, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(runner.__version__, prog_name="probatum")
def program() -> None:
    """Acceptance tests for cameras and microscopes.

    A verdict that says whose fault it is (the unit, the capture, or "cannot tell"), an uncertainty on every figure,
    in a signed report that anyone can verify and recompute offline.

    Exit codes of run: 0 every unit conforms, 1 a unit does not conform, 2 usage or spec error, 3 a unit cannot be
    decided, 4 a unit was not measured or there was nothing to judge, 70 a fault of the program, 130 interrupted.
    """


def run(arguments: Sequence[str]) -> Exit:
    """Run a command line and return its exit code; expected failures print one message each, never a traceback."""
    try:
        result = program.main(list(arguments), prog_name="probatum", standalone_mode=False)
    except click.exceptions.Exit as stop:
        return Exit(stop.exit_code)
    except click.exceptions.Abort:
        raise KeyboardInterrupt from None
    except click.ClickException as error:
        error.show(sys.stderr)
        return Exit.USAGE
    except VerificationRefused as error:
        print(error, file=sys.stderr)
        return Exit.DOES_NOT_CONFORM
    except StorageError as error:
        print(error, file=sys.stderr)
        return Exit.FAULT
    except ProbatumError as error:
        print(error, file=sys.stderr)
        return Exit.USAGE
    return result if isinstance(result, Exit) else Exit.CONFORMS
