"""The lot's files, rebuilt from all results of one spec in a run's folder."""

import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from runner.judge.lot import judge_lot
from runner.report import lot_page, store, tables
from runner.report.document import RunFacts, program
from runner.spec.model import Spec

LOT = "lot.json"
LOT_PAGE = "lot.html"
LOT_TABLE = "lot.csv"
VALUES = "lot-values.json"
"""All values of the lot in one compact file, for judging them again without opening every unit's results."""


def write_lot_files(out: Path, spec: Spec, facts: RunFacts, unused: tuple[str, ...]) -> dict[str, Any]:
    """Write `lot.json`, `lot.html`, `lot.csv` and the values; return the contents of `lot.json`.

    Args:
        out: Folder of the run; its lock is held by the caller.
        spec: The spec whose results count.
        facts: What the run states.
        unused: Files and folders that no pattern used.
    """
    known: dict[str, str] = {}
    parts = (_needed(document, known) | {"spec": spec.expanded} for document in store.each_result(out, spec.digest))
    documents = sorted(parts, key=lambda d: str(d["unit"]["serial"]))
    document = {"number": spec.document.number, "revision": spec.document.revision, "digest": spec.digest}
    lot: dict[str, Any] = dict(judge_lot(documents)) | {
        "format": "probatum-lot/1",
        "program": program(),
        "document": document,
        "title": spec.document.title,
        "product": spec.unit.product,
        "lot": facts.lot,
        "operator": facts.operator,
        "station": facts.station.name,
        "time": facts.time,
        "unused": list(unused),
    }
    store.write_whole(out / LOT, _json(lot))
    store.write_whole(out / LOT_PAGE, lot_page.html(lot, documents).encode())
    store.write_whole(out / LOT_TABLE, tables.lot_csv(documents))
    store.write_whole(out / VALUES, _json(_values(document, documents)))
    return lot


def _json(data: Mapping[str, Any]) -> bytes:
    return json.dumps(data, sort_keys=True, ensure_ascii=False, allow_nan=False, indent=1).encode() + b"\n"


_COLUMNS = ("capture", "attempt", "region", "channel", "quantity", "parameters", "part", "estimator", "value", "u")
_OF_UNIT = ("document", "unit", "time", "simulated", "verdict", "at_fault", "because", "reasons", "next")
_LEFT_OUT = ("steps", "parameters")
"""What of a check no file of the lot tells."""


def _needed(document: Mapping[str, Any], known: dict[str, str]) -> dict[str, Any]:
    """Return what the lot's files tell of a unit, without the rest: a large lot must fit into memory.

    Args:
        document: The unit's results.
        known: Texts of units before; units say mostly the same, and each text is kept once.
    """

    def kept(value: Any) -> Any:
        return known.setdefault(value, value) if isinstance(value, str) else value

    needed = {key: document[key] for key in _OF_UNIT}
    needed["checks"] = [{k: kept(v) for k, v in c.items() if k not in _LEFT_OUT} for c in document["checks"]]
    needed["values"] = [[kept(reading[column]) for column in _COLUMNS] for reading in document["readings"]]
    return needed


def _values(document: Mapping[str, Any], documents: list[dict[str, Any]]) -> dict[str, Any]:
    units = {d["unit"]["serial"]: d["values"] for d in documents}
    return {"format": "probatum-values/1", "document": document, "columns": list(_COLUMNS), "units": units}
