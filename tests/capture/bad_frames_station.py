"""Staged bad captures that only the station's own words show: its manifest and the sidecars of its frames."""

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

from tests.capture.bad_frames import tiff
from tests.capture.staged import Kind, Staged, changed, codes, manifest, sha, spec_text

ASKS = """\
    sidecar:
      {require: [serial, time], exposure: 2 ms, gain: 6 dB, temperature: from 20 to 30 degC, counter: consecutive}
"""


def said(unit: str, repeat: int, **changes: Any) -> dict[str, Any]:
    """Return what a good sidecar says; a change to None takes a field away."""
    fields = {"serial": unit, "exposure": "2 ms", "gain": "6 dB", "temperature": "23.5 degC", "counter": 40 + repeat}
    fields |= {"time": f"2026-12-01T09:30:0{repeat}Z", "operator's mood": "good"} | changes
    return {name: value for name, value in fields.items() if value is not None}


def _station_unit(folder: Path, serial: str, seed: int) -> None:
    for repeat in (1, 2):
        (folder / f"flat-{repeat}.tif").write_bytes(tiff(codes(seed + repeat)))
        (folder / f"flat-{repeat}.json").write_text(json.dumps(said(serial, repeat)))
    manifest(folder)


STATION = Kind(spec_text(capture=ASKS), _station_unit)


def _sums_unit(folder: Path, _serial: str, seed: int) -> None:
    for repeat in (1, 2):
        (folder / f"flat-{repeat}.tif").write_bytes(tiff(codes(seed + repeat)))
    lines = [f"{sha(file.read_bytes())}  {file.name}\n" for file in sorted(folder.glob("*.tif"))]
    (folder / "manifest.sha256").write_text("".join(lines))


SUMS = Kind(spec_text(), _sums_unit)


def _says(**changes: Any) -> Callable[[Path], None]:
    """Return what writes another sidecar of the second frame, listed as the station would."""

    def spoil(folder: Path) -> None:
        (folder / "flat-2.json").write_text(json.dumps(said(folder.name, 2, **changes)))
        manifest(folder)

    return spoil


def _text(text: str) -> Callable[[Path], None]:
    def spoil(folder: Path) -> None:
        (folder / "flat-2.json").write_text(text)
        manifest(folder)

    return spoil


def _without(*names: str) -> Callable[[Path], None]:
    def spoil(folder: Path) -> None:
        for name in names:
            (folder / name).unlink()

    return spoil


def _listed_wrong(**changes: Any) -> Callable[[Path], None]:
    return lambda folder: manifest(folder, **changes)


def _other_frame(folder: Path) -> None:
    (folder / "flat-2.tif").write_bytes(tiff(codes(99)))


def _longer(folder: Path) -> None:
    (folder / "flat-2.tif").write_bytes((folder / "flat-2.tif").read_bytes() + b"\0\0")


def _late(folder: Path) -> None:
    text = (folder / "manifest.json").read_text()
    data = json.loads(text)
    data["files"] = [entry for entry in data["files"] if entry["name"] != "flat-2.tif"]
    data["count"] -= 1
    (folder / "manifest.json").write_text(json.dumps(data))


def _cut_list(folder: Path) -> None:
    path = folder / "manifest.sha256"
    path.write_text(path.read_text()[:-20])


def _half_sum(folder: Path) -> None:
    path = folder / "manifest.sha256"
    path.write_text(path.read_text()[:40] + "\n")


def _two_sidecars(folder: Path) -> None:
    (folder / "flat-2.json").unlink()
    (folder / "flat-2.yaml").write_text("serial: WS8-000555\nexposure: 2 ms\n")
    manifest(folder)


def _lost_sidecar(folder: Path) -> None:
    (folder / "flat-2.json").unlink()
    manifest(folder)


BAD_STATION = (
    Staged("listed frame not there", "manifest.json: flat-2.tif is listed and not there",
           STATION, _without("flat-2.tif")),
    Staged("listed frame of another size", r"flat-2.tif has \d+ bytes, listed are \d+", STATION, _longer),
    Staged("listed frame replaced", "flat-2.tif is not the file that was listed: its SHA-256 differs",
           STATION, _other_frame),
    Staged("frame after the station had finished", "flat-2.tif is not listed: it came after", STATION, _late),
    Staged("sidecar changed after the station had finished",
           "flat-2.json has .* bytes, listed are|flat-2.json is not the file",
           STATION, changed("flat-2.json", lambda f: json.dumps(said(f.name, 2, gain="6.0 dB")).encode())),
    Staged("manifest cut", "the manifest cannot be used", STATION,
           changed("manifest.json", lambda f: (f / "manifest.json").read_bytes()[:150])),
    Staged("manifest that miscounts", "it counts 7 files and lists 4", STATION, _listed_wrong(count=7)),
    Staged("manifest that leads out of the folder", "is no path inside the folder", STATION,
           _listed_wrong(count=1, files=[{"name": "../x", "size": 1, "sha256": "0" * 64}])),
    Staged("manifest without sizes", "has no size in bytes", STATION,
           _listed_wrong(count=1, files=[{"name": "x", "sha256": "0" * 64}])),
    Staged("list of sums cut in its last line", "its last line is not complete", SUMS, _cut_list),
    Staged("list of sums with half a digest", "line 1 is not a digest of 64 digits and a name", SUMS, _half_sum),
    Staged("frame that is not the summed one", "manifest.sha256: flat-2.tif is not the file that was listed", SUMS,
           _other_frame),
    Staged("summed frame not there", "manifest.sha256: flat-1.tif is listed and not there",
           SUMS, _without("flat-1.tif")),
    Staged("sidecar of another unit", "flat-2.json: the sidecar says unit WS8-000999",
           STATION, _says(serial="WS8-000999")),
    Staged("sidecar without serial", "no sidecar says its serial", STATION, _says(serial=None)),
    Staged("wrong exposure", "exposure is 4 ms, the spec asks for 2 ms", STATION, _says(exposure="4 ms")),
    Staged("exposure without unit", "exposure is '2'; write it as in a spec, for example 2 ms",
           STATION, _says(exposure=2)),
    Staged("exposure in another kind of unit", "exposure is '2 px'", STATION, _says(exposure="2 px")),
    Staged("wrong gain", "gain is 12 dB, the spec asks for 6 dB", STATION, _says(gain="12 dB")),
    Staged("gain as a factor where decibels are asked", "gain is 4, plain ratio is no decibel", STATION, _says(gain=4)),
    Staged("too warm", "temperature is 41.5 °C, the spec asks for 20 °C to 30 °C",
           STATION, _says(temperature="41.5 degC")),
    Staged("no time", "no sidecar says its time", STATION, _says(time=None)),
    Staged("time that is none", "time is 'noon'", STATION, _says(time="noon")),
    Staged("counter twice", "counter 41 as in flat-1.tif: one frame twice", STATION, _says(counter=41)),
    Staged("counter jumps", "counter 45 follows 41 of flat-1.tif: 3 frames are lost", STATION, _says(counter=45)),
    Staged("counter goes back", "counter 40 follows 41 of flat-1.tif: the frames are out of order", STATION,
           _says(counter=40)),
    Staged("counter that is no number", "counter is 'forty-two'", STATION, _says(counter="forty-two")),
    Staged("sidecar lost", "no sidecar says its exposure", STATION,
           _lost_sidecar),
    Staged("sidecar cut", "flat-2.json: the sidecar cannot be read", STATION, _text('{"serial": "WS8-0001')),
    Staged("sidecar empty", "flat-2.json: the sidecar is empty", STATION, _text("")),
    Staged("sidecar with a field twice", "'exposure' stands twice", STATION,
           _text('{"exposure": "2 ms", "exposure": "4 ms"}')),
    Staged("sidecar that is a list", "no mapping of fields", STATION, _text("[1, 2]")),
    Staged("YAML sidecar of another unit", "flat-2.yaml: the sidecar says unit WS8-000555", STATION, _two_sidecars),
    Staged("shared sidecar of another unit", "unit.json: the sidecar says unit WS8-000777", SUMS,
           changed("unit.json", lambda _: b'{"serial": "WS8-000777"}')),
)  # fmt: skip
"""Each spoils what the station says of the first unit."""
