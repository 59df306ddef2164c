"""The files of one report hold each by itself, and together: PDF, page with its signature, results, pictures."""

import shutil
from collections.abc import Callable
from pathlib import Path

import pytest

from runner.exits import Exit
from runner.report import sign, verify
from runner.report.verify_record import NO_PAGE, Outcome
from tests.report import attacks
from tests.report import signed_world as world

AUTHORITY = attacks.target().authority


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A unit's folder as a run leaves it."""
    return world.write_unit(tmp_path_factory.mktemp("lot") / "WS8-000101", AUTHORITY.station, world.results())


@pytest.fixture
def unit(made: Path, tmp_path: Path) -> Path:
    """A copy that a test may spoil."""
    return Path(shutil.copytree(made, tmp_path / made.name))


def _outcome(path: Path) -> Outcome:
    return verify.verify_unit(path, roots=[AUTHORITY.root], now=world.NOW, tools=world.TOOLS)


def _refusals(path: Path) -> str:
    outcome = _outcome(path)
    assert outcome.exit is Exit.DOES_NOT_CONFORM
    return "; ".join(f"{check.name}: {check.sentence}" for check in outcome.checks if check.held is False)


def _sub(old: bytes, new: bytes) -> Callable[[bytes], bytes]:
    return lambda data: data.replace(old, new)


def test_a_whole_folder_holds(unit: Path) -> None:
    """What is spoiled below holds before; every part is named."""
    outcome = _outcome(unit)

    assert outcome.exit is Exit.CONFORMS, outcome.checks
    names = [check.name for check in outcome.checks]
    assert names.count("PDF signature") == names.count("HTML signature") == names.count("files") == 1


@pytest.mark.parametrize(
    "change",
    [
        _sub(b"\n", b"\r\n"),
        lambda data: b"\xef\xbb\xbf" + data,
        lambda data: data.rstrip(b"\n"),
        lambda data: data + b"\n",
    ],
    ids=["CRLF", "byte order mark", "last line end cut", "last line end doubled"],
)
def test_line_ends_changed_on_the_way_are_told_as_that(unit: Path, change: Callable[[bytes], bytes]) -> None:
    """Refused, but with what happened and what to do: mail and git do that, not forgers."""
    page = unit / "report.html"
    page.write_bytes(change(page.read_bytes()))

    assert "HTML report: its line ends were changed on the way" in _refusals(unit)
    assert "get the file again as it was sent" in _refusals(page)


def test_a_changed_page_is_told_as_that(unit: Path) -> None:
    """A word changed, the signature kept."""
    page = unit / "report.html"
    page.write_bytes(page.read_bytes().replace(b"does not conform", b"conforms"))

    assert "HTML report: it was changed after signing" in _refusals(unit)


def test_a_page_without_its_signature_is_refused(unit: Path) -> None:
    """An unsigned page beside a signed PDF could say anything."""
    (unit / "report.html.p7s").unlink()

    assert "the .p7s file belongs beside it" in _refusals(unit)


def test_a_page_signed_by_another_authority_is_refused(unit: Path) -> None:
    """The page kept, signed anew by a look-alike with the same names."""
    page = (unit / "report.html").read_bytes()
    forged = sign.sign_detached(page, attacks.look_alike(), time=world.SIGNED)
    (unit / "report.html.p7s").write_bytes(forged)

    found = _refusals(unit)
    assert "HTML signer: none of the given authorities issued" in found
    assert "files: PDF and HTML page are signed by different certificates" in found


def test_two_stations_did_not_sign_one_report(unit: Path) -> None:
    """Another station of the same authority is trusted, too, but not for the other half of a report."""
    other = attacks.strange_certificate(AUTHORITY)
    page = (unit / "report.html").read_bytes()
    (unit / "report.html.p7s").write_bytes(sign.sign_detached(page, other, time=world.SIGNED))

    assert _refusals(unit) == "files: PDF and HTML page are signed by different certificates"


def test_a_picture_swapped_or_added_beside_is_refused(unit: Path) -> None:
    """Pictures beside the report are those inside the signed PDF, and no other."""
    (unit / "pictures" / "chart-overview.png").write_bytes(world.picture(10))
    assert _refusals(unit) == "files: the picture chart-overview.png is not the signed one"

    (unit / "pictures" / "chart-overview.png").write_bytes(world.PICTURES["chart-overview.png"])
    (unit / "pictures" / "more.png").write_bytes(world.picture())
    assert _refusals(unit) == "files: the picture more.png is not the signed one"


def test_results_beside_are_the_attached_ones(unit: Path) -> None:
    """Results that look better, canonical and following from their readings, are found beside a PDF."""
    better = world.canonical(world.results(value=0.3, verdict="conforms"))
    (unit / "results.json").write_bytes(better)

    assert _refusals(unit) == "files: results.json is another than the signed one"


def test_a_page_alone_binds_its_results(unit: Path) -> None:
    """Without the PDF the page must be what results.json beside it prints to."""
    (unit / "report.pdf").unlink()
    assert _outcome(unit).exit is Exit.CONFORMS

    (unit / "results.json").write_bytes(world.canonical(world.results(value=0.3, verdict="conforms")))
    assert "HTML page: the page does not show what the data say" in _refusals(unit)


def test_a_page_without_results_is_left_open(unit: Path) -> None:
    """A page and its signature alone are sound; that they follow from data cannot be told."""
    for name in ("report.pdf", "results.json"):
        (unit / name).unlink()
    outcome = _outcome(unit / "report.html")

    assert outcome.exit is Exit.CANNOT_DECIDE
    assert [check.accept for check in outcome.checks if check.held is None] == [NO_PAGE]


def test_a_broken_pdf_spoils_a_good_page(unit: Path) -> None:
    """What follows the broken part is still told."""
    pdf = unit / "report.pdf"
    pdf.write_bytes(pdf.read_bytes()[:-7])

    assert _refusals(unit).startswith("PDF report: ")
    assert "HTML signature" in [check.name for check in _outcome(unit).checks if check.held]
