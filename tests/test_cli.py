"""The command line: it answers at once, loads nothing it does not need, and never shows a traceback."""

import json
import os
import subprocess
import sys
from pathlib import Path

import click
import pytest

from runner import __main__ as entry
from runner import cli
from runner.errors import UsageError, VerificationRefused
from runner.exits import Exit

ROOT = Path(__file__).resolve().parent.parent


def _python(code: str) -> str:
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, cwd=ROOT)
    return done.stdout


HEAVY = {
    "numpy",
    "scipy",
    "weasyprint",
    "pyhanko",
    "matplotlib",
    "pydantic",
    "yaml",
    "jinja2",
    "cryptography",
    "PIL",
    "asyncio",
    "multiprocessing",
}
"""Libraries that take long to load: for measuring, drawing, signing, other processes."""


def test_help_loads_no_heavy_library() -> None:
    """`--help` and the help of every verb need none of the libraries of the work itself, so that they come at once."""
    code = (
        "import sys\nfrom runner import cli\n"
        "for words in (['--help'], ['--version'], *([verb, '--help'] for verb in cli.COMMANDS)):\n"
        "    assert cli.run(words) == 0\n"
        "print('LOADED', *sorted(sys.modules))"
    )

    assert HEAVY & set(_python(code).split("LOADED")[1].split()) == set()


@pytest.mark.parametrize("verb", cli.COMMANDS)
def test_every_verb_has_its_own_help(verb: str, capsys: pytest.CaptureFixture[str]) -> None:
    """Each verb of the list is there and tells what it does."""
    assert cli.run([verb, "--help"]) is Exit.CONFORMS
    assert len(capsys.readouterr().out) > 80


def test_the_readme_names_every_verb_that_it_shows() -> None:
    """Every `probatum VERB` of the README is a verb of the program."""
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    shown = {line.split()[1] for line in readme.splitlines() if line.startswith("    probatum ")}

    assert shown
    assert shown <= set(cli.COMMANDS)


def test_the_version_is_told(capsys: pytest.CaptureFixture[str]) -> None:
    """`--version` prints name and version."""
    assert cli.run(["--version"]) is Exit.CONFORMS
    assert capsys.readouterr().out.startswith("probatum, version ")


@pytest.mark.parametrize(
    "words", [["judge"], ["run"], ["run", "a.yaml", "frames"], ["run", "--nothing"], ["run", "a", "b", "--out"]]
)
def test_a_wrong_command_line_exits_2(words: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    """Unknown verbs and options and missing arguments end in a sentence and exit code 2."""
    assert cli.run(words) is Exit.USAGE
    assert "Traceback" not in capsys.readouterr().err


@pytest.mark.parametrize(
    ("raised", "code"),
    [
        (UsageError("it is gone"), Exit.USAGE),
        (VerificationRefused("it was changed"), Exit.DOES_NOT_CONFORM),
        (click.UsageError("no such thing"), Exit.USAGE),
    ],
)
def test_expected_failures_print_one_sentence(
    raised: Exception, code: Exit, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """Each kind of expected failure has its exit code and shows its own words."""

    def fail(*_: object, **__: object) -> None:
        raise raised

    monkeypatch.setattr(cli.program, "main", fail)

    assert cli.run([]) is code
    assert str(getattr(raised, "message", raised)) in capsys.readouterr().err


def test_an_uncaught_fault_exits_70_and_an_interrupt_130(monkeypatch: pytest.MonkeyPatch) -> None:
    """A fault of the program is never mistaken for a unit that does not conform."""

    def fail(_: object) -> Exit:
        raise ZeroDivisionError

    def interrupt(_: object) -> Exit:
        raise KeyboardInterrupt

    for action, code in ((fail, 70), (interrupt, 130)):
        monkeypatch.setattr(cli, "run", action)
        with pytest.raises(SystemExit, match=str(code)):
            entry.main()


def test_the_program_starts_from_any_folder(tmp_path: Path) -> None:
    """Ready specs and templates are found wherever the program is called."""
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    done = subprocess.run(
        [sys.executable, "-m", "runner", "schema"],
        capture_output=True,
        text=True,
        check=True,
        cwd=tmp_path,
        env=environment,
    )

    assert json.loads(done.stdout)["$schema"].startswith("https://json-schema.org/")


@pytest.mark.parametrize(("words", "full"), [("schema", "stdout"), ("run nowhere", "stderr"), ("--help", "stdout")])
def test_lines_that_cannot_be_written_never_read_as_a_verdict(words: str, full: str) -> None:
    """With its lines going to a full disk the program ends with 70: 1 would say that a unit does not conform."""
    command = [sys.executable, "-m", "runner", *words.split()]
    with Path("/dev/full").open("wb") as disk:
        to, also = (disk, subprocess.PIPE) if full == "stdout" else (subprocess.PIPE, disk)
        done = subprocess.run(command, cwd=ROOT, check=False, stdout=to, stderr=also)

    assert done.returncode == 70
    assert b"Traceback" not in (done.stdout or b"") + (done.stderr or b"")


def test_a_reader_who_goes_away_changes_nothing() -> None:
    """Whoever reads only the first lines, as `head` does, gets them without a complaint."""
    line = f"{sys.executable} -m runner schema | head -1"
    done = subprocess.run(line, shell=True, cwd=ROOT, capture_output=True, check=False)  # noqa: S602 - fixed words

    assert done.stdout.startswith(b"{")
    assert done.stderr == b""
