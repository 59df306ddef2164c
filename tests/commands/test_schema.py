"""`probatum schema` prints the schema."""

import json

import pytest

from runner.cli import run
from runner.exits import Exit
from runner.spec.schema import spec_schema


def test_the_schema_is_printed(capsys: pytest.CaptureFixture[str]) -> None:
    """The output is the JSON Schema itself, ready to be kept in a file."""
    assert run(["schema"]) == Exit.CONFORMS
    assert json.loads(capsys.readouterr().out) == spec_schema()
