"""Whatever is given to verify ends in an outcome or in one sentence about how to use it, never in a traceback."""

import shutil
from collections.abc import Callable
from datetime import timedelta
from pathlib import Path
from random import Random
from typing import Any

import pytest

from runner.errors import UsageError
from runner.exits import Exit
from runner.report import verify
from runner.report.verify_record import Outcome
from tests.report import attacks
from tests.report import signed_world as world

AUTHORITY = attacks.target().authority
GOOD, OTHER = "WS8-000101", "WS8-000102"


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A lot of two units as a run leaves it."""
    lot = tmp_path_factory.mktemp("made") / "lot"
    documents = (world.results(GOOD), world.results(OTHER, 0.25, "conforms"))
    for document in documents:
        world.write_unit(lot / document["unit"]["serial"], AUTHORITY.station, document)
    for name, data in world.lot_files({"lot": "L7"}, documents).items():
        (lot / name).write_bytes(data)
    return lot


@pytest.fixture
def lot(made: Path, tmp_path: Path) -> Path:
    """A copy that a test may spoil."""
    return Path(shutil.copytree(made, tmp_path / "lot"))


def _outcomes(path: Path, **more: Any) -> list[Outcome]:
    usual: dict[str, Any] = {"roots": [AUTHORITY.root], "now": world.NOW, "tools": world.TOOLS}
    return list(verify.verify(path, verify.terms_of(**{**usual, **more})))


def test_a_lot_is_its_units_and_then_itself(lot: Path) -> None:
    """Every unit in the order of names, then the lot's own files; each with what it says."""
    outcomes = _outcomes(lot)

    assert [outcome.path for outcome in outcomes] == [lot / GOOD, lot / OTHER, lot]
    assert [outcome.exit for outcome in outcomes] == [Exit.CONFORMS] * 3
    said = [outcome.document["verdict"] for outcome in outcomes if outcome.document is not None]
    assert said == ["does not conform", "conforms"]


def test_one_units_trouble_stops_no_other(lot: Path) -> None:
    """A damaged unit is refused, the next one still looked at."""
    (lot / GOOD / "report.pdf").write_bytes(b"%PDF-1.7\n")

    assert [outcome.exit for outcome in _outcomes(lot)] == [1, 0, 1]


@pytest.mark.parametrize("name", ["report.pdf", "report.html", "report.html.p7s"])
def test_each_file_can_be_given_by_itself(lot: Path, name: str) -> None:
    """A PDF alone; a page with its signature, by either name."""
    (outcome,) = _outcomes(lot / GOOD / name)

    assert outcome.exit is Exit.CONFORMS
    assert outcome.document is not None
    assert outcome.document["unit"]["serial"] == GOOD


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("nothing", "it cannot be read: No such file or directory"),
        ("nothing.pdf", "it cannot be read: No such file or directory"),
        (f"{GOOD}/results.json", r"it is no report; report\.pdf, report\.html with its \.p7s, or a folder of reports"),
        (f"{GOOD}/pictures", r"there is no report in it; report\.pdf or report\.html"),
    ],
)
def test_what_is_no_report_is_a_matter_of_use(lot: Path, name: str, words: str) -> None:
    """The sentence says what may be given; nothing was refused, because nothing was judged."""
    with pytest.raises(UsageError, match=words):
        _outcomes(lot / name)


def test_words_to_accept_are_known() -> None:
    """A misspelt word would otherwise accept nothing, or later something else."""
    with pytest.raises(UsageError, match="'page' is nothing that can be accepted; unknown-signer, "):
        verify.terms_of(accept=["page"])


def test_what_the_reader_gives_decides_what_is_told(lot: Path) -> None:
    """Without a root the signer is open and the full digest told; without a list that nothing was looked up."""
    (alone,) = _outcomes(lot / GOOD, roots=[])
    assert alone.exit is Exit.CANNOT_DECIDE
    assert any(len(remark.rsplit("sha256:", 1)[-1]) == 64 for remark in alone.remarks)
    assert _outcomes(lot / GOOD, roots=[], accept=["unknown-signer"])[0].exit is Exit.CONFORMS

    (trusted,) = _outcomes(lot / GOOD)
    assert trusted.remarks == ("whether the certificate was revoked was not checked: no --crl was given",)


def test_strange_and_missing_files_are_remarked(lot: Path) -> None:
    """What was not looked at is named, so that nobody takes it for verified."""
    (lot / GOOD / "summary.pdf").write_bytes(b"%PDF-1.7 all is well")
    (lot / GOOD / "report.html").unlink()
    remarks = _outcomes(lot / GOOD)[0].remarks

    assert "not part of the report, not looked at: summary.pdf" in remarks
    assert "not there: report.html" in remarks


def test_a_refused_report_says_nothing(lot: Path) -> None:
    """Contents count only once their signature is true."""
    pdf = lot / GOOD / "report.pdf"
    pdf.write_bytes(pdf.read_bytes() + b" ")

    assert _outcomes(pdf)[0].document is None


def _cut(data: bytes, random: Random) -> bytes:
    return data[: random.randrange(len(data))]


def _noise(data: bytes, random: Random) -> bytes:
    begin = random.randrange(len(data))
    return data[:begin] + random.randbytes(random.randrange(1, 400)) + data[begin + 40 :]


def _doubled(data: bytes, random: Random) -> bytes:
    begin = random.randrange(len(data))
    return data[:begin] + data[begin // 2 :]


def _zeros(data: bytes, random: Random) -> bytes:
    return data[: random.randrange(len(data))].ljust(len(data), b"\0")


@pytest.mark.parametrize("damage", [_cut, _noise, _doubled, _zeros])
@pytest.mark.parametrize("name", ["report.pdf", "report.html", "report.html.p7s", "results.json"])
def test_every_kind_of_damage_ends_refused(
    lot: Path, name: str, damage: Callable[[bytes, Random], bytes], capfd: pytest.CaptureFixture[str]
) -> None:
    """Cut, overwritten, doubled or zeroed files: refused in words, without an error and without noise of libraries."""
    file, random = lot / GOOD / name, Random(7)
    whole = file.read_bytes()
    alone = name != "results.json"
    for _ in range(6):
        file.write_bytes(damage(whole, random))
        (outcome,) = _outcomes(file if alone else lot / GOOD)
        assert outcome.exit is Exit.DOES_NOT_CONFORM
        assert all(check.sentence for check in outcome.checks)
    told = capfd.readouterr()
    assert (told.out, told.err) == ("", "")


def test_a_report_of_the_future_is_refused(lot: Path) -> None:
    """The reader's own clock counts."""
    (outcome,) = _outcomes(lot / GOOD, now=world.SIGNED - timedelta(days=1))

    assert outcome.exit is Exit.DOES_NOT_CONFORM
    assert any("lies in the future" in check.sentence for check in outcome.checks)


def test_hidden_folders_are_no_units(lot: Path) -> None:
    """A folder that a run is still making begins with a dot and is left alone."""
    shutil.copytree(lot / GOOD, lot / ".making-WS8-000103")

    assert [outcome.exit for outcome in _outcomes(lot)] == [Exit.CONFORMS] * 3


def test_frames_are_measured_again_only_when_given(lot: Path, tmp_path: Path) -> None:
    """With frames the same outcome holds more checks; other frames refuse it."""
    (tmp_path / "value.txt").write_text("0.1874")
    (tmp_path / "digest.txt").write_text("0" * 64)
    (more,) = _outcomes(lot / GOOD, frames=tmp_path)
    assert more.exit is Exit.CONFORMS
    assert "values" in [check.name for check in more.checks]

    (tmp_path / "digest.txt").write_text("1" * 64)
    assert _outcomes(lot / GOOD, frames=tmp_path)[0].exit is Exit.DOES_NOT_CONFORM
