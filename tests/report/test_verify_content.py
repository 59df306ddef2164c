"""What a report says holds only if its data are whole, its page shows them and nothing else, and its verdicts follow.

Most forgeries here are by a signer whom the reader trusts: the signature is true, and what was signed is not. Pages
that claim to be another version's are in `test_verify_other_versions.py`.
"""

from collections.abc import Callable, Mapping
from copy import deepcopy
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest

from runner.exits import Exit
from runner.report import verify, verify_content
from runner.report.document import canonical
from runner.report.page import html_page
from runner.report.pdf import render_pdf
from runner.report.sign import sign_pdf
from runner.report.unit_files import unit_files
from runner.report.verify_record import NO_PAGE, WORDING
from runner.spec.revision import digest
from tests.report import attacks, forge
from tests.report import signed_world as world

Change = Callable[[dict[str, Any]], None]


def _better(document: dict[str, Any]) -> dict[str, Any]:
    """Return what a liar would like a failing report to say, or the other way round."""
    better = deepcopy(document)
    better["verdict"] = better["checks"][0]["verdict"] = "does not conform"
    better["at_fault"] = better["checks"][0]["at_fault"] = "unit"
    return better


# ---- data


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (lambda b: b.replace(b'"format":', b'"format":1,"format":', 1), "the key 'format' stands twice"),
        (lambda b: b.replace(b'"u":0.', b'"u":NaN,"v":0.', 1), "NaN is not allowed"),
        (lambda b: b.replace(b",", b", ", 1), "not in canonical form"),
        (lambda b: b.removesuffix(b"\n"), "not in canonical form"),
        (lambda b: b[:-9], "it is no strict JSON"),
        (lambda _b: b"", "it is no strict JSON"),
    ],
    ids=["doubled key", "NaN", "a space", "no line end", "cut off", "empty"],
)
def test_data_that_readers_could_take_in_two_ways_are_refused(
    tmp_path: Path, change: Callable[[bytes], bytes], words: str
) -> None:
    """Signed rightly, and still refused: other readers might find another verdict in them."""
    results = change(canonical(forge.document()))
    assert results != canonical(forge.document())

    assert words in forge.refusals(
        forge.outcome_of(tmp_path, "report.pdf", forge.signed_pdf(forge.document(), results))
    )


def _attached(results: bytes, pictures: Mapping[str, bytes]) -> bytes:
    """Sign a PDF of the small world with any attachments."""
    pdf = world.print_pdf(world.html_page(world.results(), world.PICTURES), pictures, results)
    return sign_pdf(pdf, attacks.target().authority.station, time=world.SIGNED)


def _listed(change: Change) -> bytes:
    document = world.results()
    change(document)
    return canonical(document)


@pytest.mark.parametrize(
    ("results", "pictures", "words"),
    [
        (_listed(lambda _: None), {**world.PICTURES, "more.png": world.picture()}, "listed pictures: more.png"),
        (_listed(lambda _: None), {}, "listed pictures: chart-overview.png"),
        (_listed(lambda _: None), {"chart-overview.png": world.picture(1)}, "chart-overview.png is not the listed"),
        (_listed(lambda d: d["pictures"].append(d["pictures"][0])), world.PICTURES, "lists a picture twice"),
        (_listed(lambda d: d["spec"]["document"].update(revision="D")), world.PICTURES, "not that of the spec inside"),
        (_listed(lambda d: d.pop("pictures")), world.PICTURES, "results.json cannot be read: KeyError"),
    ],
    ids=["one more", "one less", "another", "twice", "another spec", "no list"],
)
def test_attachments_are_exactly_what_the_results_list(
    tmp_path: Path, results: bytes, pictures: Mapping[str, bytes], words: str
) -> None:
    """One picture more, less, swapped or listed twice; another spec than its digest says."""
    more: dict[str, Any] = {"roots": [attacks.target().authority.root], "tools": world.TOOLS, "now": world.NOW}

    assert words in forge.refusals(forge.outcome_of(tmp_path, "report.pdf", _attached(results, pictures), **more))


# ---- what the reader expects


def test_another_unit_or_spec_than_expected_is_refused() -> None:
    """Only the reader knows which report is due; the digest of the spec may be given with or without its prefix."""
    document = world.results()
    mark = document["document"]["digest"]
    for right in (mark, mark.removeprefix("sha256:")):
        found = verify_content.check_expected(document, forge.terms(serial="WS8-000101", spec_digest=right))
        assert [check.held for check in found] == [True, True]

    found = verify_content.check_expected(document, forge.terms(serial="WS8-000102", spec_digest=digest({})))
    assert [check.held for check in found] == [False, False]


@pytest.mark.parametrize(
    ("folder", "lot", "words"),
    [
        ("WS8-000101", True, None),
        ("WS8-000102", True, "the folder WS8-000102 holds the report of another unit, WS8-000101"),
        ("copy", True, "the folder copy holds the report of another unit, WS8-000101"),
        ("WS8-000102", False, "the folder WS8-000102 holds the report of another unit, WS8-000101"),
        ("from the customer", False, None),
    ],
)
def test_a_report_lies_in_its_own_units_folder(folder: str, lot: bool, words: str | None) -> None:
    """In a lot a folder's name is the serial; elsewhere it may be anything but another unit's serial."""
    found = [check.sentence for check in verify_content.check_serial(world.results(), folder, lot=lot)]

    assert found == ([] if words is None else [words])


def test_a_serial_is_one_of_its_spec() -> None:
    """The program judges no other; a serial that is a path is none either."""
    (found,) = verify_content.check_serial(world.results("../WS8-000101"), "x", lot=False)

    assert found.held is False
    assert "'../WS8-000101' is no serial of its spec, which asks for WS8-[0-9]{6}" in found.sentence


# ---- page


def test_a_pdf_that_shows_other_than_its_data_is_refused(tmp_path: Path) -> None:
    """The signer lies: the page says one verdict, the data inside another; the words that differ are told."""
    true = forge.document()

    found = forge.refusals(forge.outcome_of(tmp_path, "report.pdf", forge.signed_pdf(_better(true), canonical(true))))

    assert "PDF page: the page does not show what the data say: it shows " in found


def test_an_html_page_that_shows_other_than_its_data_is_refused(tmp_path: Path) -> None:
    """The same lie on the page for screens."""
    true = forge.document()
    html = html_page(_better(true), forge.pictures()).encode()

    found = forge.refusals(forge.outcome_of_page(tmp_path, html, canonical(true)))

    assert "HTML page: the page does not show what the data say: it shows " in found


def test_a_page_that_cannot_be_printed_again_is_left_open(tmp_path: Path) -> None:
    """An edition of the templates that is not here is no proof of a forgery, and no proof of the page either."""
    document = forge.document()
    document["program"]["template"] = "2"
    pdf = forge.signed_pdf(document)
    outcome = forge.outcome_of(tmp_path, "report.pdf", pdf)

    assert forge.left_open(outcome) == [NO_PAGE]
    assert any("edition 2 of the templates" in check.sentence for check in outcome.checks)


# ---- verdicts


def _verdict(document: dict[str, Any]) -> None:
    document["verdict"] = "cannot decide"


def _check(document: dict[str, Any]) -> None:
    document["checks"][0]["verdict"] = "does not conform"


def _limit(document: dict[str, Any]) -> None:
    document["checks"][0]["at_least"] = 0.1


def _blame(document: dict[str, Any]) -> None:
    document["at_fault"] = "capture"


def _reading(document: dict[str, Any]) -> None:
    for reading in document["readings"]:
        if reading["quantity"] == "mtf50":
            reading["value"] = 0.15


def _left_out(document: dict[str, Any]) -> None:
    document["checks"].pop()


def _simulated(document: dict[str, Any]) -> None:
    document["simulated"] = True


def _next(document: dict[str, Any]) -> None:
    document["next"] = "Sell the unit."


@pytest.mark.parametrize("change", [_verdict, _check, _limit, _blame, _reading, _left_out, _simulated, _next])
def test_a_verdict_that_does_not_follow_is_refused(change: Change) -> None:
    """Verdict, blame, limit, marks and sentences all follow from readings and spec, or do not hold."""
    document = forge.document()
    change(document)
    found = verify_content.check_verdicts(document, forge.terms())

    assert found.held is False
    assert "what it says does not follow from its readings" in found.sentence


def test_a_report_altered_as_a_whole_by_its_own_station_is_refused(tmp_path: Path) -> None:
    """A reading changed in the data and all pages made and signed anew: they agree with each other, not with it."""
    document = forge.document()
    _reading(document)
    bench = world.shared_bench()
    for name, data in unit_files(document, forge.pictures(), bench.authority.station, []).items():
        (tmp_path / name).parent.mkdir(exist_ok=True)
        (tmp_path / name).write_bytes(data)

    (outcome,) = verify.verify(tmp_path, forge.terms())

    assert "verdicts: what it says does not follow from its readings" in forge.refusals(outcome)
    assert {c.held for c in outcome.checks if c.name in {"PDF page", "HTML page", "files"}} == {True}


def test_a_strangers_altered_report_is_refused_with_and_without_a_root(tmp_path: Path) -> None:
    """A stranger who alters a verdict is found by the readings even by a reader who trusts nobody."""
    document = forge.document()
    _verdict(document)
    pdf = render_pdf(document, forge.pictures(), canonical(document))
    signed = sign_pdf(pdf, world.authority(made=datetime.now(UTC)).station, time=datetime.now(UTC))

    assert "verdicts: " in forge.refusals(forge.outcome_of(tmp_path, "report.pdf", signed, roots=[]))
    assert "PDF signer: none of the given authorities" in forge.refusals(
        forge.outcome_of(tmp_path, "report.pdf", signed)
    )


def test_a_strangers_whole_report_holds_for_nobody(tmp_path: Path) -> None:
    """Readings, verdicts and pages agree: without a root it is open who signed, with one it is refused."""
    document = forge.document()
    pdf = render_pdf(document, forge.pictures(), canonical(document))
    signed = sign_pdf(pdf, world.authority(made=datetime.now(UTC)).station, time=datetime.now(UTC))

    assert forge.left_open(forge.outcome_of(tmp_path, "report.pdf", signed, roots=[])) == ["unknown-signer"]
    assert forge.outcome_of(tmp_path, "report.pdf", signed).exit is Exit.DOES_NOT_CONFORM


def test_another_versions_sentences_are_left_open() -> None:
    """Where all verdicts follow and only words differ, another version may have written them; this one may not."""
    document = forge.document()
    document["program"]["version"] = "0.0.9"
    document["because"] = document["checks"][0]["reason"] = "said in other words"
    found = verify_content.check_verdicts(document, forge.terms())
    assert (found.held, found.accept) == (None, WORDING)

    document["checks"][0]["verdict"] = "does not conform"
    assert verify_content.check_verdicts(document, forge.terms()).held is False
    own = forge.document()
    own["because"] = "said in other words"
    assert verify_content.check_verdicts(own, forge.terms()).held is False


def test_data_that_cannot_be_judged_are_refused() -> None:
    """Whatever the judge cannot take is no sound report."""
    document = forge.document()
    del document["readings"][0]["value"]
    found = verify_content.check_verdicts(document, forge.terms())

    assert found.held is False
    assert "the readings cannot be judged again" in found.sentence


@pytest.mark.parametrize(
    ("stated", "again", "rows"),
    [
        ({"a": 1.0}, {"a": 1.0 + 5e-10}, []),
        ({"a": 1.0}, {"a": 1.0 + 5e-9}, ["a: 1.0 stated, 1.000000005 found"]),
        ({"a": 1}, {"a": True}, ["a: 1 stated, True found"]),
        ({"a": 0.0}, {"a": 1e-300}, ["a: 0.0 stated, 1e-300 found"]),
        ({"a": None}, {"a": 0}, ["a: None stated, 0 found"]),
        ({"a": 1}, {}, ["a is missing on one side"]),
        ([1, 2], [1], ["2 stated, 1 found"]),
        ([{"name": "x", "v": 1}], [{"name": "x", "v": 2}], ["x: v: 1 stated, 2 found"]),
        ({"a": "1"}, {"a": 1}, ["a: '1' stated, 1 found"]),
        ({"a": []}, {"a": {}}, ["a: [] stated, {} found"]),
    ],
)
def test_differences_are_told_by_place(stated: Any, again: Any, rows: list[str]) -> None:
    """Numbers agree to a relative 1e-9 and nothing else agrees by half; each difference says where."""
    assert verify_content.differing(stated, again) == rows


def test_a_strangers_slow_pattern_is_never_used() -> None:
    """A report whose spec has a pattern that would try for years is refused at once, with the reason."""
    document = {"unit": {"serial": "a" * 40 + "!"}, "spec": {"unit": {"serial": "(a+)+b"}}}

    (check,) = verify_content.check_serial(document, "unit", lot=False)

    assert check.held is False
    assert "can take forever" in check.sentence
