"""Where a key's pass phrase comes from: environment, file, or prompt. It is never an argument: those are visible."""

import os
import sys
from pathlib import Path

import click

from runner.errors import UsageError

VARIABLE = "PROBATUM_PASSPHRASE"


def find_passphrase(
    file: Path | None, *, confirm: bool = False, variable: str = VARIABLE, question: str = "Pass phrase"
) -> bytes | None:
    """Return the pass phrase, or None when there is nowhere to ask for one.

    Args:
        file: File whose first line it is.
        confirm: Ask twice, for a new key.
        variable: Environment variable.
        question: Words of the prompt.

    Raises:
        UsageError: The file cannot be read.
    """
    if file is not None:
        try:
            return file.read_bytes().split(b"\n", 1)[0].rstrip(b"\r")
        except OSError as error:
            raise UsageError(f"it cannot be read: {error.strerror}", where=str(file)) from error
    if variable in os.environ:
        return os.environ[variable].encode()
    if sys.stdin.isatty():
        return str(click.prompt(question, hide_input=True, confirmation_prompt=confirm)).encode()
    return None
