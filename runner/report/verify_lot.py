"""The lot's own files carry no signature: they hold if they are what the units' signed results give."""

import json
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from runner.errors import ProbatumError, VerificationRefused
from runner.report import store, verify_record, verify_text
from runner.report.verify_content import differing
from runner.report.verify_record import Check, Outcome, Terms

LOT = "lot.json"
FILES = (LOT, "lot.html", "lot.csv", "lot-values.json")
NOT_SIGNED = (
    "the lot's own files are not signed: they were compared with the units found here; "
    "whether units were left out of files and folder alike, only whoever knows their number can tell"
)
STATED = ("time", "operator", "station")
"""What all units of one run state alike, besides spec and lot."""


def has_files(folder: Path) -> bool:
    """Tell whether a folder is a run's: it holds any of a lot's own files, or the facts of the run."""
    return any((folder / name).is_file() for name in (*FILES, store.RUN))


def check_lot(folder: Path, documents: Sequence[Mapping[str, Any] | None], terms: Terms) -> Outcome:
    """Check a lot's own files against the results of its units.

    Args:
        folder: The lot's folder.
        documents: Every unit's signed results; None where a unit was refused.
        terms: With the tool that writes a lot's files.
    """
    try:
        checks = _checks(folder, documents, terms)
    except ProbatumError as error:
        checks = [Check("lot", False, str(error))]
    except Exception as error:  # noqa: BLE001 - whatever goes wrong, the lot's files are not confirmed
        checks = [Check("lot", False, f"it cannot be checked: {type(error).__name__}: {error}")]
    return Outcome(folder, tuple(checks), (NOT_SIGNED,), terms.accept)


def _checks(folder: Path, documents: Sequence[Mapping[str, Any] | None], terms: Terms) -> list[Check]:
    signed = [document for document in documents if document is not None]
    if len(signed) < len(documents):
        count = len(documents) - len(signed)
        return [Check("lot", False, f"{count} of its units do not hold, so neither do the lot's own files")]
    if not signed:
        return [Check("lot", False, "the lot's own files are here, but no unit's report")]
    odd = _strangers(signed)
    if odd:
        return [Check("lot", False, odd)]
    if not (folder / LOT).is_file():
        return [Check("lot", False, f"{LOT} is missing: it was taken away, or the run was cut off before its end")]
    lot = _strict((folder / LOT).read_bytes())
    again = terms.tools.lot_files(lot, tuple(signed))
    return [_file(folder / name, again, lot) for name in FILES]


def _strangers(documents: Sequence[Mapping[str, Any]]) -> str:
    """Tell what keeps reports from being those of one run: a lot's files leave out what is not of their spec."""
    first = documents[0]
    for document in documents[1:]:
        here, there = document["unit"]["serial"], first["unit"]["serial"]
        if document["document"]["digest"] != first["document"]["digest"]:
            return f"{here} is judged by another spec than {there}"
        if document["unit"]["lot"] != first["unit"]["lot"]:
            return f"{here} is of lot '{document['unit']['lot']}', {there} of lot '{first['unit']['lot']}'"
        odd = [name for name in STATED if document[name] != first[name]]
        if odd:
            return f"{here} states another {odd[0]} than {there}, so they are not of one run"
    return ""


def _file(path: Path, again: Mapping[str, bytes], lot: Mapping[str, Any]) -> Check:
    name = path.name
    if not path.is_file():
        return Check(name, False, f"{name} is missing")
    data = path.read_bytes()
    if again[name] == data:
        return Check(name, True, f"{name} follows from the units' results")
    foreign = f"{name} does not follow from the units' results"
    if lot["program"] == _strict(again[LOT])["program"]:
        return Check(name, False, foreign)
    if name.endswith(".json"):
        stated, found = (_strict(one) | {"program": None} for one in (data, again[name]))
        odd = differing(stated, found)
        if odd:
            return Check(name, False, f"{foreign}: {odd[0]}")
        return Check(name, True, f"{name} follows from the units' results")
    if name.endswith(".html"):
        compared = verify_text.compare_html(data, again[name])
        if isinstance(compared, str):
            return Check(name, False, f"{foreign}: {compared}")
        words = f"{name} was written by other versions of the program; it shows {compared.value}"
        return Check(name, None, words, verify_record.TEXT_ONLY)
    return Check(name, False, foreign)


def _strict(data: bytes) -> dict[str, Any]:
    """Read JSON in which no key stands twice."""

    def once(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
        keys = dict(pairs)
        if len(keys) != len(pairs):
            raise VerificationRefused("a key stands twice in one of the lot's files")
        return keys

    found = json.loads(data, object_pairs_hook=once)
    if not isinstance(found, dict):
        raise VerificationRefused("one of the lot's files holds something else than is expected")
    return found
