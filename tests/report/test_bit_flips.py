"""One bit flipped anywhere in a report's files ends refused, as the command refuses.

Everything goes through `verify.verify`, which the command calls for each of its arguments, with the authority's root
given, so that no flip can hide behind an unknown signer. Pages printed again are kept for equal arguments, see
`signed_world.printed_once`. A folder is refused as soon as one of its files is, so a flip in a page's signature is
judged on the page alone. The default run flips every bit of both signatures and 60 elsewhere; the study flips 1,000.
"""

import shutil
import time
from collections import Counter
from collections.abc import Iterable
from pathlib import Path
from random import Random

import pytest

from runner.exits import Exit
from runner.report import verify
from runner.report.verify_record import Terms
from runner.report.verify_tools import default_tools
from tests.report import attacks
from tests.report import signed_world as world

SEED = 20260314
PDF, HTML, SIGNATURE, JSON = "report.pdf", "report.html", "report.html.p7s", "results.json"
PICTURE = "pictures/chart-overview.png"


@pytest.fixture
def unit(tmp_path: Path) -> Path:
    """A copy of a real report that a test may spoil."""
    source = world.shared_bench().unit
    return Path(shutil.copytree(source, tmp_path / source.name))


@pytest.fixture(scope="module")
def terms() -> Terms:
    """A reader who trusts the authority."""
    return verify.terms_of(roots=[world.shared_bench().authority.root], tools=world.printed_once(default_tools()))


def _exits(target: Path, file: Path, bits: Iterable[int], terms: Terms) -> Counter[Exit]:
    """Flip bits of a file in turn; count how verifying a target ends, and see that it holds before and after."""
    data = file.read_bytes()
    found: Counter[Exit] = Counter()
    assert _exit(target, terms) is Exit.CONFORMS
    with file.open("r+b", buffering=0) as flat:
        for bit in bits:
            flat.seek(bit // 8)
            flat.write(bytes([data[bit // 8] ^ 1 << bit % 8]))
            found[_exit(target, terms)] += 1
            flat.seek(bit // 8)
            flat.write(data[bit // 8 : bit // 8 + 1])
    assert _exit(target, terms) is Exit.CONFORMS
    return found


def _exit(target: Path, terms: Terms) -> Exit:
    (outcome,) = verify.verify(target, terms)
    return outcome.exit


def _gap(pdf: Path) -> tuple[int, int]:
    """Return where the signature stands in a PDF, its brackets included."""
    begin, end = attacks.gap(pdf.read_bytes())
    return begin - 1, end + 1


def _elsewhere(folder: Path, count: int) -> dict[str, list[int]]:
    """Choose bits over PDF, HTML and JSON in even parts, the PDF's signature left out."""
    random = Random(SEED)
    begin, end = _gap(folder / PDF)
    chosen: dict[str, list[int]] = {PDF: [], HTML: [], JSON: []}
    places = {name: list(range((folder / name).stat().st_size)) for name in chosen}
    del places[PDF][begin:end]
    for n in range(count):
        name = (PDF, HTML, JSON)[n % 3]
        chosen[name].append(8 * random.choice(places[name]) + random.randrange(8))
    return chosen


def test_every_bit_of_the_pages_signature(unit: Path, terms: Terms) -> None:
    """Every bit of report.html.p7s flipped in turn: every flip is refused."""
    (unit / JSON).rename(unit / "aside")  # the page's signature is looked at first; what it shows matters no more
    alone = verify.terms_of(roots=terms.roots, tools=terms.tools, accept=["page-not-compared"])
    bits = range(8 * (unit / SIGNATURE).stat().st_size)

    assert _exits(unit / HTML, unit / SIGNATURE, bits, alone) == {Exit.DOES_NOT_CONFORM: len(bits)}
    assert len(bits) > 7000


def test_every_bit_of_the_pdfs_signature(unit: Path, terms: Terms) -> None:
    """Every bit of the signature's hexadecimal digits, padding and brackets in report.pdf: every flip is refused."""
    begin, end = _gap(unit / PDF)
    bits = range(8 * begin, 8 * end)

    assert _exits(unit / PDF, unit / PDF, bits, terms) == {Exit.DOES_NOT_CONFORM: len(bits)}
    assert len(bits) > 20_000


def test_some_bits_of_every_file(unit: Path, terms: Terms) -> None:
    """Random bits over PDF, HTML and JSON of a unit's folder: every flip is refused."""
    for name, bits in _elsewhere(unit, 60).items():
        assert _exits(unit, unit / name, bits, terms) == {Exit.DOES_NOT_CONFORM: 20}, name


def test_some_bits_of_a_picture(unit: Path, terms: Terms) -> None:
    """Pictures beside the report are bound to it as well."""
    random = Random(SEED)
    bits = [random.randrange(8 * (unit / PICTURE).stat().st_size) for _ in range(20)]

    assert _exits(unit, unit / PICTURE, bits, terms) == {Exit.DOES_NOT_CONFORM: 20}


def test_some_bits_of_results_without_a_pdf(unit: Path, terms: Terms) -> None:
    """Beside a page alone results.json is bound by its digest on the page: random flips are refused all the same."""
    (unit / PDF).unlink()
    random = Random(SEED)
    bits = [random.randrange(8 * (unit / JSON).stat().st_size) for _ in range(20)]

    assert _exits(unit, unit / JSON, bits, terms) == {Exit.DOES_NOT_CONFORM: 20}


@pytest.mark.study
def test_a_thousand_bits_elsewhere(unit: Path, terms: Terms) -> None:
    """1,000 random bits over PDF, HTML and JSON outside the signatures: none is accepted."""
    for name, bits in _elsewhere(unit, 1000).items():
        begun = time.monotonic()
        found = _exits(unit, unit / name, bits, terms)
        took = time.monotonic() - begun
        print(f"\n{name}: {found.total()} flips, {found[Exit.DOES_NOT_CONFORM]} refused, {took:.1f} s")
        assert found == {Exit.DOES_NOT_CONFORM: len(bits)}
