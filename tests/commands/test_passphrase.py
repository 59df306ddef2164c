"""A pass phrase comes from a file, the environment or a prompt."""

from pathlib import Path

import pytest

from runner.commands.passphrase import VARIABLE, find_passphrase
from runner.errors import UsageError


def test_a_files_first_line_is_the_pass_phrase(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The file comes before the environment; line ends of either kind are no part of it."""
    monkeypatch.setenv(VARIABLE, "other")
    (tmp_path / "p").write_bytes(b"walnut shell\r\nsecond line\n")

    assert find_passphrase(tmp_path / "p") == b"walnut shell"


def test_the_environment_is_read(monkeypatch: pytest.MonkeyPatch) -> None:
    """CI jobs hand the pass phrase over in the environment."""
    monkeypatch.setenv(VARIABLE, "kernel")

    assert find_passphrase(None) == b"kernel"


def test_without_a_place_to_ask_there_is_none(monkeypatch: pytest.MonkeyPatch) -> None:
    """Nothing is asked where nobody can answer."""
    monkeypatch.delenv(VARIABLE, raising=False)

    assert find_passphrase(None) is None


def test_a_missing_file_is_told(tmp_path: Path) -> None:
    """A wrong path ends in a sentence."""
    with pytest.raises(UsageError, match="it cannot be read: No such file"):
        find_passphrase(tmp_path / "nothing")
