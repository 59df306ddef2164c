"""A small world for signing and verifying: keys, a results document, pages printed by stand-ins, a folder of it all."""

import atexit
import html
import json
import shutil
import tempfile
import warnings
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from datetime import UTC, datetime, timedelta
from functools import cache
from hashlib import sha256
from io import BytesIO
from pathlib import Path
from typing import Any

from cryptography import x509
from cryptography.hazmat.primitives.serialization import Encoding, NoEncryption, PrivateFormat
from PIL import Image

from runner import acceptance
from runner.report import certificates as profiles
from runner.report.document import canonical, parse
from runner.report.keys import StationKey
from runner.report.sign import sign_detached, sign_pdf
from runner.report.verify_record import Tools
from runner.spec.revision import digest
from tests.capture.bad_frames import SPEC_TEXT, UNIT, good_lot

__all__ = ["canonical", "parse"]  # the program's own, for whoever builds a world
MADE = datetime(2026, 3, 2, 8, 0, tzinfo=UTC)
SIGNED = datetime(2026, 3, 14, 9, 30, tzinfo=UTC)
NOW = datetime(2026, 5, 1, 12, 0, tzinfo=UTC)


@dataclass(frozen=True)
class Authority:
    """A root with its key, and one station."""

    root: x509.Certificate
    """Certificate of the authority."""
    root_key: Any
    """Its key."""
    station: StationKey
    """A station that it issued."""


def authority(name: str = "Walnut Works test authority", station: str = "Bench 2", made: datetime = MADE) -> Authority:
    """Make an authority and a station at a given time."""
    root_key, key = profiles.new_private_key(), profiles.new_private_key()
    root = profiles.root_certificate(root_key, name, made)
    certificate = profiles.station_certificate(key.public_key(), station, root, root_key, made)
    return Authority(root, root_key, StationKey(key, certificate))


def picture(shade: int = 128) -> bytes:
    """Return a small PNG."""
    out = BytesIO()
    Image.new("L", (24, 16), shade).save(out, "PNG")
    return out.getvalue()


PICTURES = {"chart-overview.png": picture()}


def results(serial: str = "WS8-000101", value: float = 0.1874, verdict: str = "does not conform") -> dict[str, Any]:
    """Return a results document with one reading and one check."""
    spec = {
        "probatum-spec": 1,
        "document": {"number": "WS8-ACC", "revision": "C"},
        "unit": {"product": "WS8", "serial": "WS8-[0-9]{6}"},
    }
    frame = {"file": "chart-01.tif", "sha256": "0" * 64, "shape": [1200, 1600], "dtype": "uint16", "page": None}
    reading = {
        "capture": "chart",
        "attempt": 1,
        "region": "lower left",
        "channel": "mono",
        "quantity": "mtf50",
        "parameters": {},
        "part": "system",
        "estimator": "joint fit",
        "value": value,
        "u": 0.003,
        "measured_in": "cy/px",
        "bound": None,
        "refusal": None,
    }
    return {
        "format": "probatum-results/1",
        "program": {"name": "probatum", "version": "1"},
        "document": {"number": "WS8-ACC", "revision": "C", "digest": digest(spec)},
        "spec": spec,
        "unit": {"serial": serial, "lot": "L7"},
        "time": "2026-03-14T09:29:00Z",
        "operator": "",
        "station": {},
        "simulated": False,
        "captures": [{"name": "chart", "attempt": 1, "frames": [frame], "file_faults": []}],
        "readings": [reading],
        "curves": [],
        "pictures": [{"name": n, "sha256": sha256(d).hexdigest()} for n, d in PICTURES.items()],
        "warnings": [],
    } | judged(value, verdict)


def judged(value: float, verdict: str | None = None) -> dict[str, Any]:
    """Return what a judge says of the reading: at least 0.2."""
    right = "conforms" if value >= 0.2 else "does not conform"
    check = {
        "characteristic": 2,
        "capture": "chart",
        "where": "lower left",
        "channel": "mono",
        "value": value,
        "u": 0.003,
        "at_least": 0.2,
        "verdict": verdict or right,
        "at_fault": None if (verdict or right) == "conforms" else "unit",
        "reason": f"lower left corner: {value:.3f} cy/px, at least 0.200",
    }
    return {
        "verdict": check["verdict"],
        "at_fault": check["at_fault"],
        "because": "the unit is soft",
        "checks": [check],
    }


def html_page(document: Mapping[str, Any], pictures: Mapping[str, bytes]) -> str:
    """Print a page."""
    check = document["checks"][0]
    rows = [document["unit"]["serial"], document["verdict"], check["reason"], check["verdict"], *sorted(pictures)]
    body = "\n".join(f"<p>{html.escape(str(row))}</p>" for row in rows)
    return f'<!doctype html>\n<html lang="en"><title>Test report</title><body>\n{body}\n</body></html>\n'


def render_pdf(document: Mapping[str, Any], pictures: Mapping[str, bytes], data: bytes) -> bytes:
    """Print results to PDF/A-3 with their attachments."""
    return print_pdf(html_page(document, pictures), pictures, data)


def print_pdf(page: str, pictures: Mapping[str, bytes], data: bytes) -> bytes:
    """Print any page to PDF/A-3 with attachments."""
    from weasyprint import HTML, Attachment

    day = datetime(2026, 3, 14, tzinfo=UTC)
    files = {"results.json": data, **pictures}
    attached = [
        Attachment(
            file_obj=BytesIO(d),
            name=n,
            relationship="Data" if n == "results.json" else "Supplement",
            created=day,
            modified=day,
            base_url="report:/x",
        )
        for n, d in files.items()
    ]
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", ResourceWarning)  # the library leaves its own colour profile open
        pdf: bytes = HTML(string=page).write_pdf(
            pdf_variant="pdf/a-3u", pdf_tags=True, attachments=attached, pdf_identifier=sha256(data).digest()[:16]
        )
    return pdf


def judge_again(document: Mapping[str, Any]) -> dict[str, Any]:
    """Judge again: the verdict that follows from the value."""
    return dict(document) | judged(document["readings"][0]["value"])


def measure_again(document: Mapping[str, Any], frames: Path) -> tuple[dict[str, Any], dict[str, bytes]]:
    """Measure again: the value that stands in the folder's one file."""
    value = float((frames / "value.txt").read_text())
    frame = document["captures"][0]["frames"][0] | {"sha256": (frames / "digest.txt").read_text()}
    captures = [document["captures"][0] | {"frames": [frame]}]
    readings = [document["readings"][0] | {"value": value}]
    return dict(document) | {"captures": captures, "readings": readings} | judged(value), dict(PICTURES)


def lot_files(lot: Mapping[str, Any], documents: tuple[Mapping[str, Any], ...]) -> dict[str, bytes]:
    """Write a lot's files."""
    verdicts = {d["unit"]["serial"]: d["verdict"] for d in documents}
    table = "".join(f"{serial},{verdict}\r\n" for serial, verdict in verdicts.items()).encode()
    data = json.dumps({"lot": lot["lot"], "program": {"version": "1"}, "units": verdicts}).encode()
    return {"lot.json": data, "lot.html": b"<p>" + table, "lot.csv": table, "lot-values.json": data}


def program() -> dict[str, Any]:
    """Tell this version."""
    return {"name": "probatum", "version": "1"}


TOOLS = Tools(program, parse, render_pdf, html_page, judge_again, measure_again, lot_files)


def other_version(tools: Tools = TOOLS) -> Tools:
    """Return tools of another version: its pages have the same words and other bytes."""

    def pdf(document: Mapping[str, Any], pictures: Mapping[str, bytes], data: bytes) -> bytes:
        return print_pdf(html_page(document, pictures).replace("<p>", '<p style="margin: 9pt">'), pictures, data)

    def page(document: Mapping[str, Any], pictures: Mapping[str, bytes]) -> str:
        return html_page(document, pictures).replace("\n", "\n  ")

    later = {"name": "probatum", "version": "2"}
    return replace(tools, program=lambda: later, render_pdf=pdf, html_page=page)


def write_unit(folder: Path, key: StationKey, document: Mapping[str, Any], time: datetime = SIGNED) -> Path:
    """Write a unit's folder as a run leaves it."""
    data = canonical(document)
    page = html_page(document, PICTURES).encode()
    files = {
        "results.json": data,
        "report.html": page,
        "report.html.p7s": sign_detached(page, key, time=time),
        "report.pdf": sign_pdf(render_pdf(document, PICTURES, data), key, time=time),
    }
    (folder / "pictures").mkdir(parents=True)
    for name, contents in (files | {f"pictures/{n}": d for n, d in PICTURES.items()}).items():
        (folder / name).write_bytes(contents)
    return folder


@dataclass(frozen=True)
class Bench:
    """Real reports: two good units, judged and signed by the program itself."""

    authority: Authority
    """Who vouches for the station."""
    spec: Path
    """Test spec."""
    frames: Path
    """Frames of both units."""
    reports: Path
    """The lot's folder."""
    unit: Path
    """Folder of the first unit's report."""


def bench(folder: Path) -> Bench:
    """Run the program on two good units in a folder; the station's key is as old as a minute."""
    made = authority(made=datetime.now(UTC) - timedelta(minutes=1))
    spec, frames, key, reports = folder / "spec.yaml", folder / "frames", folder / "key.pem", folder / "reports"
    spec.write_text(SPEC_TEXT)
    good_lot(frames)
    private = made.station.private.private_bytes(Encoding.PEM, PrivateFormat.PKCS8, NoEncryption())
    key.write_bytes(private + made.station.certificate.public_bytes(Encoding.PEM))
    outcome = acceptance.run(acceptance.Order(spec=spec, frames=frames, out=reports, lot="L7", key=key))
    assert [unit.verdict for unit in outcome.units] == ["conforms", "conforms"]
    return Bench(made, spec, frames, reports, reports / UNIT)


@cache
def shared_bench() -> Bench:
    """Run the program once for all tests of a process; who spoils a report copies it before."""
    folder = Path(tempfile.mkdtemp(prefix="bench-"))
    atexit.register(shutil.rmtree, folder, ignore_errors=True)
    return bench(folder)


def printed_once(tools: Tools) -> Tools:
    """Return tools that keep what they printed and judged, and give it again for the same arguments.

    They are functions of their arguments (`test_verify_tools` holds them to it), so that a verdict with kept pages is
    the verdict without.
    """
    kept: dict[Any, Any] = {}

    def keep(name: str, call: Callable[..., Any]) -> Callable[..., Any]:
        def answer(document: Mapping[str, Any], *more: Any) -> Any:
            key = (name, canonical(document), *map(repr, more))
            if key not in kept:
                kept[key] = call(document, *more)
            return kept[key]

        return answer

    return replace(
        tools,
        render_pdf=keep("pdf", tools.render_pdf),
        html_page=keep("html", tools.html_page),
        judge_again=keep("judge", tools.judge_again),
    )


def pictures_of(unit: Path) -> dict[str, bytes]:
    """Return the pictures beside a real report."""
    return {file.name: file.read_bytes() for file in sorted((unit / "pictures").iterdir())}
