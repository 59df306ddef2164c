"""The lot's own files carry no signature: they hold if they are what the units' signed results give."""

import json
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from runner.errors import ProbatumError
from runner.report import verify_record
from runner.report.verify_content import differing
from runner.report.verify_record import Check, Outcome, Terms

LOT = "lot.json"
FILES = (LOT, "lot.html", "lot.csv", "lot-values.json")


def has_files(folder: Path) -> bool:
    """Tell whether a folder holds any of a lot's own files."""
    return any((folder / name).is_file() for name in FILES)


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
    return Outcome(folder, tuple(checks), accept=terms.accept)


def _checks(folder: Path, documents: Sequence[Mapping[str, Any] | None], terms: Terms) -> list[Check]:
    signed = [document for document in documents if document is not None]
    if len(signed) < len(documents):
        count = len(documents) - len(signed)
        return [Check("lot", False, f"{count} of its units do not hold, so neither do the lot's own files")]
    if not (folder / LOT).is_file():
        return [Check("lot", False, f"{LOT} is missing")]
    lot = json.loads((folder / LOT).read_bytes())
    again = terms.tools.lot_files(folder, lot, tuple(signed))
    return [_file(folder / name, again, lot) for name in FILES]


def _file(path: Path, again: Mapping[str, bytes], lot: Mapping[str, Any]) -> Check:
    name = path.name
    if not path.is_file():
        return Check(name, False, f"{name} is missing")
    data = path.read_bytes()
    if again.get(name) == data:
        return Check(name, True, f"{name} follows from the units' results")
    fresh = json.loads(again[LOT])
    if fresh["program"] == lot["program"]:
        return Check(name, False, f"{name} does not follow from the units' results")
    if name.endswith(".json"):
        stated, found = (json.loads(one) | {"program": None} for one in (data, again[name]))
        odd = differing(stated, found)
        if odd:
            return Check(name, False, f"{name} does not follow from the units' results: {odd[0]}")
        return Check(name, True, f"{name} follows from the units' results")
    if name.endswith(".csv"):
        return Check(name, False, f"{name} does not follow from the units' results")
    words = f"{name} was written by another version of the program and cannot be compared"
    return Check(name, None, words, verify_record.NO_PAGE)
