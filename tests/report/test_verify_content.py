"""What a report says holds only if its data are whole, its page shows them and nothing else, and its verdicts follow.

Most forgeries here are by a signer whom the reader trusts: the signature is true, and what was signed is not.
"""

from collections.abc import Callable, Mapping
from copy import deepcopy
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest

from runner.exits import Exit
from runner.report import page as page_module
from runner.report import pdf as pdf_module
from runner.report import verify, verify_content
from runner.report.document import canonical, parse
from runner.report.facts import report_facts
from runner.report.page import html_page
from runner.report.pdf import render_pdf
from runner.report.sign import sign_detached, sign_pdf
from runner.report.unit_files import unit_files
from runner.report.verify_record import NO_PAGE, TEXT_ONLY, WORDING, Outcome, Terms
from runner.report.verify_tools import default_tools
from runner.spec.revision import digest
from tests.report import attacks
from tests.report import signed_world as world

Change = Callable[[dict[str, Any]], None]
Restyle = Callable[..., None]
TOOLS = world.printed_once(default_tools())


def _document() -> dict[str, Any]:
    """Return a copy of a real report's results."""
    return parse((world.shared_bench().unit / "results.json").read_bytes())


def _pictures() -> dict[str, bytes]:
    return world.pictures_of(world.shared_bench().unit)


def _terms(**more: Any) -> Terms:
    usual: dict[str, Any] = {"roots": [world.shared_bench().authority.root], "tools": TOOLS}
    return verify.terms_of(**{**usual, **more})


def _outcome(folder: Path, name: str, data: bytes, **more: Any) -> Outcome:
    """Write a file into a folder and verify it."""
    (folder / name).write_bytes(data)
    (outcome,) = verify.verify(folder / name, _terms(**more))
    return outcome


def _pdf(document: Mapping[str, Any], results: bytes | None = None) -> bytes:
    """Sign a PDF that shows one thing and has another attached, if another is given."""
    pdf = render_pdf(document, _pictures(), canonical(document) if results is None else results)
    return sign_pdf(pdf, world.shared_bench().authority.station, time=datetime.now(UTC))


def _html(folder: Path, html: bytes, results: bytes, **more: Any) -> Outcome:
    """Sign a page, lay results and pictures beside it, and verify it."""
    (folder / "results.json").write_bytes(results)
    (folder / "report.html.p7s").write_bytes(sign_detached(html, world.shared_bench().authority.station))
    (folder / "pictures").mkdir()
    for name, data in _pictures().items():
        (folder / "pictures" / name).write_bytes(data)
    return _outcome(folder, "report.html", html, **more)


def _refusals(outcome: Outcome) -> str:
    assert outcome.exit is Exit.DOES_NOT_CONFORM
    return "; ".join(f"{check.name}: {check.sentence}" for check in outcome.checks if check.held is False)


def _open(outcome: Outcome) -> list[str]:
    assert outcome.exit is Exit.CANNOT_DECIDE, outcome.checks
    return [check.accept for check in outcome.checks if check.held is None]


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
    results = change(canonical(_document()))
    assert results != canonical(_document())

    assert words in _refusals(_outcome(tmp_path, "report.pdf", _pdf(_document(), results)))


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

    assert words in _refusals(_outcome(tmp_path, "report.pdf", _attached(results, pictures), **more))


# ---- what the reader expects


def test_another_unit_or_spec_than_expected_is_refused() -> None:
    """Only the reader knows which report is due; the digest of the spec may be given with or without its prefix."""
    document = world.results()
    mark = document["document"]["digest"]
    for right in (mark, mark.removeprefix("sha256:")):
        found = verify_content.check_expected(document, _terms(serial="WS8-000101", spec_digest=right))
        assert [check.held for check in found] == [True, True]

    found = verify_content.check_expected(document, _terms(serial="WS8-000102", spec_digest=digest({})))
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
    true = _document()

    found = _refusals(_outcome(tmp_path, "report.pdf", _pdf(_better(true), canonical(true))))

    assert "PDF page: the page does not show what the data say: it shows " in found


def test_an_html_page_that_shows_other_than_its_data_is_refused(tmp_path: Path) -> None:
    """The same lie on the page for screens."""
    true = _document()
    html = html_page(_better(true), _pictures()).encode()

    found = _refusals(_html(tmp_path, html, canonical(true)))

    assert "HTML page: the page does not show what the data say: it shows " in found


@pytest.fixture
def restyled(monkeypatch: pytest.MonkeyPatch) -> Restyle:
    """A way to print pages as another version would, with more rules of style, or as a liar would, with other words."""
    real = page_module.paper_page

    def restyle(css: str, old: str = "</style>", new: str = "</style>") -> None:
        def paper(document: Mapping[str, Any]) -> tuple[str, dict[str, bytes]]:
            text, drawings = real(document)
            assert "</style>" in text
            assert old in text
            return text.replace(old, new).replace("</style>", css + "</style>", 1), drawings

        monkeypatch.setattr(pdf_module, "paper_page", paper)

    return restyle


def _elsewhere_printed(version: str | None = None) -> dict[str, Any]:
    """Return results that another version of a library, or of the program, wrote."""
    document = _document()
    document["program"]["versions"]["weasyprint"] = "69.0"
    document["program"]["version"] = version or document["program"]["version"]
    return document


MOVED = ".first { padding-top: 20mm } td { letter-spacing: 0.02pt }"
BROKEN = "@page { margin: 30mm } h2 { break-before: page }"


@pytest.mark.parametrize(
    ("css", "accept"), [(MOVED, TEXT_ONLY), (BROKEN, NO_PAGE)], ids=["lines moved", "pages broken elsewhere"]
)
def test_a_pdf_of_another_version_is_compared_by_its_text(
    tmp_path: Path, restyled: Restyle, monkeypatch: pytest.MonkeyPatch, css: str, accept: str
) -> None:
    """Other bytes, the same words: sound, and told apart by whether their order could be compared as well."""
    restyled(css)
    pdf = _pdf(_elsewhere_printed())
    monkeypatch.undo()

    outcome = _outcome(tmp_path, "report.pdf", pdf)

    assert _open(outcome) == [accept]
    assert _outcome(tmp_path, "report.pdf", pdf, accept=[accept]).exit is Exit.CONFORMS


def test_the_same_versions_print_the_same_bytes(
    tmp_path: Path, restyled: Restyle, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A page that says it was printed by these very versions, and was not, is refused in spite of its words."""
    restyled(MOVED)
    pdf = _pdf(_document())
    monkeypatch.undo()

    assert "the same versions print another page from the data" in _refusals(_outcome(tmp_path, "report.pdf", pdf))


@pytest.mark.parametrize("css", [MOVED, BROKEN], ids=["lines moved", "pages broken elsewhere"])
@pytest.mark.parametrize("lie", ["verdict", "value"])
def test_a_lie_under_another_versions_name_is_refused(
    tmp_path: Path, restyled: Restyle, monkeypatch: pytest.MonkeyPatch, css: str, lie: str
) -> None:
    """Claiming another version brings a signer no word past the data: every other word is the true page's."""
    true = _elsewhere_printed()
    value = report_facts(true).checks[0].value
    old, new = (value, value.replace("0.2", "0.3", 1)) if lie == "value" else (">conforms<", ">does not conform<")
    restyled(css, old, new)
    pdf = _pdf(true)
    monkeypatch.undo()

    found = _refusals(_outcome(tmp_path, "report.pdf", pdf))

    assert f"it shows '{'0.3' if lie == 'value' else 'does not conform'}" in found


def test_what_is_drawn_over_the_words_never_holds(
    tmp_path: Path, restyled: Restyle, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A white sheet over the verdict is not seen by text, so a page compared by text is never more than open."""
    restyled("body::before { content: ''; position: absolute; width: 9cm; height: 9cm; background: #fff }")
    pdf = _pdf(_elsewhere_printed())
    monkeypatch.undo()

    assert _open(_outcome(tmp_path, "report.pdf", pdf)) == [TEXT_ONLY]


def test_an_html_page_of_another_version_is_compared_by_its_pieces(tmp_path: Path) -> None:
    """White space set otherwise is left open; one verdict swapped with another is refused."""
    document = _elsewhere_printed()
    html = html_page(document, _pictures()).replace("\n", "\n  ").encode()
    (tmp_path / "true").mkdir()
    (tmp_path / "false").mkdir()

    assert _open(_html(tmp_path / "true", html, canonical(document))) == [TEXT_ONLY]
    lie = html.replace(b">conforms<", b">Conforms<", 1)
    assert lie != html
    assert "it shows 'Conforms" in _refusals(_html(tmp_path / "false", lie, canonical(document)))


def test_a_page_that_cannot_be_printed_again_is_left_open(tmp_path: Path) -> None:
    """An edition of the templates that is not here is no proof of a forgery, and no proof of the page either."""
    document = _document()
    document["program"]["template"] = "2"
    pdf = _pdf(document)
    outcome = _outcome(tmp_path, "report.pdf", pdf)

    assert _open(outcome) == [NO_PAGE]
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
    document = _document()
    change(document)
    found = verify_content.check_verdicts(document, _terms())

    assert found.held is False
    assert "what it says does not follow from its readings" in found.sentence


def test_a_report_altered_as_a_whole_by_its_own_station_is_refused(tmp_path: Path) -> None:
    """A reading changed in the data and all pages made and signed anew: they agree with each other, not with it."""
    document = _document()
    _reading(document)
    bench = world.shared_bench()
    for name, data in unit_files(document, _pictures(), bench.authority.station, []).items():
        (tmp_path / name).parent.mkdir(exist_ok=True)
        (tmp_path / name).write_bytes(data)

    (outcome,) = verify.verify(tmp_path, _terms())

    assert "verdicts: what it says does not follow from its readings" in _refusals(outcome)
    assert {c.held for c in outcome.checks if c.name in {"PDF page", "HTML page", "files"}} == {True}


def test_a_strangers_altered_report_is_refused_with_and_without_a_root(tmp_path: Path) -> None:
    """A stranger who alters a verdict is found by the readings even by a reader who trusts nobody."""
    document = _document()
    _verdict(document)
    pdf = render_pdf(document, _pictures(), canonical(document))
    signed = sign_pdf(pdf, world.authority(made=datetime.now(UTC)).station, time=datetime.now(UTC))

    assert "verdicts: " in _refusals(_outcome(tmp_path, "report.pdf", signed, roots=[]))
    assert "PDF signer: none of the given authorities" in _refusals(_outcome(tmp_path, "report.pdf", signed))


def test_a_strangers_whole_report_holds_for_nobody(tmp_path: Path) -> None:
    """Readings, verdicts and pages agree: without a root it is open who signed, with one it is refused."""
    document = _document()
    pdf = render_pdf(document, _pictures(), canonical(document))
    signed = sign_pdf(pdf, world.authority(made=datetime.now(UTC)).station, time=datetime.now(UTC))

    assert _open(_outcome(tmp_path, "report.pdf", signed, roots=[])) == ["unknown-signer"]
    assert _outcome(tmp_path, "report.pdf", signed).exit is Exit.DOES_NOT_CONFORM


def test_another_versions_sentences_are_left_open() -> None:
    """Where all verdicts follow and only words differ, another version may have written them; this one may not."""
    document = _elsewhere_printed("0.0.9")
    document["because"] = document["checks"][0]["reason"] = "said in other words"
    found = verify_content.check_verdicts(document, _terms())
    assert (found.held, found.accept) == (None, WORDING)

    document["checks"][0]["verdict"] = "does not conform"
    assert verify_content.check_verdicts(document, _terms()).held is False
    own = _document()
    own["because"] = "said in other words"
    assert verify_content.check_verdicts(own, _terms()).held is False


def test_data_that_cannot_be_judged_are_refused() -> None:
    """Whatever the judge cannot take is no sound report."""
    document = _document()
    del document["readings"][0]["value"]
    found = verify_content.check_verdicts(document, _terms())

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
