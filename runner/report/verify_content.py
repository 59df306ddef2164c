"""What a signed report says: whole data, a page that shows them and nothing else, verdicts that follow from them."""

import math
from collections.abc import Iterator, Mapping
from hashlib import sha256
from typing import Any

from runner.errors import ProbatumError, VerificationRefused
from runner.report import sign, verify_record, verify_text
from runner.report.cms_form import refusing
from runner.report.verify_pdf import SignedPdf
from runner.report.verify_record import Check, Terms
from runner.spec.revision import digest
from runner.spec.serials import is_serial, pattern_fault

RESULTS = "results.json"
NOT_REWRITTEN = frozenset({"program", "warnings"})
"""Keys that judging again does not give back: what wrote the report, and what the spec's file was warned of."""
DECIDING = ("verdict", "at_fault", "simulated", "checks")
"""Keys that another version of the program, too, must arrive at; of checks all but the sentences."""
WORDS = frozenset({"reason", "because", "label"})
RELATIVE = 1e-9
"""Judging again repeats the same double arithmetic; between machines its last digits may differ, not more."""


def read_results(attached: Mapping[str, bytes], terms: Terms) -> tuple[dict[str, Any], dict[str, bytes]]:
    """Return the results document and its pictures out of a report's attachments.

    Args:
        attached: Contents by name.
        terms: With the tool that reads.

    Raises:
        VerificationRefused: No strict JSON, or the attachments are not exactly it and the pictures that it lists.
    """
    if RESULTS not in attached:
        raise VerificationRefused(f"{RESULTS} is not attached")
    with refusing(f"{RESULTS} cannot be read"):
        document = terms.tools.parse(attached[RESULTS])
        listed = {str(p["name"]): str(p["sha256"]) for p in document["pictures"]}
        if len(listed) != len(document["pictures"]):
            raise VerificationRefused(f"{RESULTS} lists a picture twice")
        pictures = {name: data for name, data in attached.items() if name != RESULTS}
        if listed.keys() != pictures.keys():
            odd = ", ".join(sorted(listed.keys() ^ pictures.keys()))
            raise VerificationRefused(f"the attachments are not exactly the listed pictures: {odd}")
        for name, data in pictures.items():
            if listed[name] != sha256(data).hexdigest():
                raise VerificationRefused(f"the picture {name} is not the listed one")
        if digest(document["spec"]) != document["document"]["digest"]:
            raise VerificationRefused("the digest of the spec is not that of the spec inside")
    return document, pictures


def check_expected(document: Mapping[str, Any], terms: Terms) -> Iterator[Check]:
    """Check that this is the unit and the spec that the reader expects."""
    serial, spec = document["unit"]["serial"], document["document"]
    if terms.serial is not None:
        held = serial == terms.serial
        yield Check("unit", held, f"it is of unit {serial}" + ("" if held else f", not of {terms.serial}"))
    if terms.spec_digest is not None:
        held = terms.spec_digest.removeprefix("sha256:") == spec["digest"].removeprefix("sha256:")
        words = f"it is judged by {spec['number']} revision {spec['revision']} ({spec['digest']})"
        yield Check("spec", held, words + ("" if held else f", not by {terms.spec_digest}"))


def check_serial(document: Mapping[str, Any], folder: str, *, lot: bool) -> Iterator[Check]:
    """Check that a report does not lie in the place of another unit's, and that its serial is one of its spec.

    Args:
        document: The results.
        folder: Name of the folder that it lies in.
        lot: The folder is one of a lot's, each of which is named by its unit's serial; else any name will do that is
            not itself the serial of another unit.
    """
    serial, pattern = str(document["unit"]["serial"]), str(document["spec"]["unit"]["serial"])
    fault, _ = pattern_fault(pattern)
    if fault:
        yield Check("unit", False, fault)
    elif not is_serial(pattern, serial):
        yield Check("unit", False, f"'{serial}' is no serial of its spec, which asks for {pattern}")
    elif folder != serial and (lot or is_serial(pattern, folder)):
        yield Check("unit", False, f"the folder {folder} holds the report of another unit, {serial}")


def check_pdf_page(
    signed: SignedPdf, document: Mapping[str, Any], pictures: Mapping[str, bytes], results: bytes, terms: Terms
) -> Check:
    """Check that a PDF is what these results print to: byte for byte with all that signing added, else its text."""
    try:
        unsigned = terms.tools.render_pdf(document, pictures, results)
        stamped = signed.signature.time_stamp is not None
        again = sign.prepare(unsigned, signed.signature.certificate, signed.time, stamped=stamped)
    except Exception as error:  # noqa: BLE001 - an old edition or a missing font is no proof of a changed report
        return _no_page(error)
    if bytes(again.data) == signed.blank:
        return Check("page", True, "the page printed again from the data is the same byte for byte")
    with refusing("the text of the page cannot be read"):
        texts = verify_text.pdf_text(signed.data), verify_text.pdf_text(bytes(again.data))
        return _by_text(document, verify_text.compare_pdf(*texts), terms)


def check_html_page(html: bytes, document: Mapping[str, Any], pictures: Mapping[str, bytes], terms: Terms) -> Check:
    """Check that an HTML report is what these results print to, byte for byte, else its text."""
    try:
        again = terms.tools.html_page(document, pictures).encode()
    except Exception as error:  # noqa: BLE001 - see check_pdf_page
        return _no_page(error)
    if again == html:
        return Check("page", True, "the page printed again from the data is the same byte for byte")
    with refusing("the text of the page cannot be read"):
        return _by_text(document, verify_text.compare_html(html, again), terms)


def check_verdicts(document: Mapping[str, Any], terms: Terms) -> Check:
    """Check that verdicts, blame and sentences follow from the readings and the spec inside."""
    name = "verdicts"
    try:
        again = terms.tools.judge_again(document)
    except ProbatumError as error:
        return Check(name, False, f"the readings cannot be judged again: {error}")
    except Exception as error:  # noqa: BLE001 - data that the judge cannot take are no sound report
        return Check(name, False, f"the readings cannot be judged again: {type(error).__name__}: {error}")
    odd = differing(_kept(document), _kept(again))
    if not odd:
        return Check(name, True, f"every verdict follows from the readings ({len(document['checks'])})")
    words = "; ".join(odd[:3]) + ("; …" if len(odd) > 3 else "")
    same_version = document["program"]["version"] == terms.tools.program()["version"]
    if same_version or differing(_deciding(document), _deciding(again)):
        return Check(name, False, f"what it says does not follow from its readings: {words}")
    found = f"all verdicts follow, but version {document['program']['version']} wrote other words: {words}"
    return Check(name, None, found, verify_record.WORDING)


def differing(stated: Any, again: Any, where: str = "", relative: float = RELATIVE) -> list[str]:
    """Return where two pieces of plain JSON data differ, one phrase each; numbers may differ by a relative amount."""
    if isinstance(stated, Mapping) and isinstance(again, Mapping):
        rows = [f"{where}{key} is missing on one side" for key in sorted(stated.keys() ^ again.keys())]
        for key in sorted(stated.keys() & again.keys()):
            rows += differing(stated[key], again[key], f"{where}{key}: ", relative)
        return rows
    if isinstance(stated, list | tuple) and isinstance(again, list | tuple):
        if len(stated) != len(again):
            return [f"{where}{len(stated)} stated, {len(again)} found"]
        rows = []
        for index, (one, other) in enumerate(zip(stated, again, strict=True), 1):
            rows += differing(one, other, f"{where}{_title(one, index)}: ", relative)
        return rows
    if _number(stated) and _number(again):
        return [] if math.isclose(stated, again, rel_tol=relative) else [f"{where}{stated!r} stated, {again!r} found"]
    return [] if stated == again and type(stated) is type(again) else [f"{where}{stated!r} stated, {again!r} found"]


def _number(value: Any) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool)


def _title(item: Any, index: int) -> str:
    """Name an item of a list by what a reader knows it by."""
    if not isinstance(item, Mapping):
        return str(index)
    keys = ("characteristic", "name", "capture", "where", "region", "label")
    names = [str(item[key]) for key in keys if item.get(key)]
    return " ".join(names) or str(index)


def _kept(document: Mapping[str, Any]) -> dict[str, Any]:
    return {key: value for key, value in document.items() if key not in NOT_REWRITTEN}


def _deciding(document: Mapping[str, Any]) -> dict[str, Any]:
    kept = {key: document[key] for key in DECIDING}
    kept["checks"] = [{k: v for k, v in check.items() if k not in WORDS} for check in document["checks"]]
    return kept


def _no_page(error: Exception) -> Check:
    found = f"the page cannot be printed again here: {type(error).__name__}: {error}"
    return Check("page", None, found, verify_record.NO_PAGE)


def _by_text(document: Mapping[str, Any], found: verify_text.Order | str, terms: Terms) -> Check:
    """Judge a page whose bytes differ by its text: never as fully compared, for what covers the words is not seen.

    Where all versions are the same, the bytes must be, too.
    """
    if isinstance(found, str):
        return Check("page", False, f"the page does not show what the data say: {found}")
    if document["program"] == terms.tools.program():
        return Check("page", False, f"the same versions print another page from the data, though with {found.value}")
    words = f"the page is not the same byte for byte (other versions printed it); it shows {found.value}"
    accept = verify_record.TEXT_ONLY if found is verify_text.Order.SAME else verify_record.NO_PAGE
    return Check("page", None, words, accept)
