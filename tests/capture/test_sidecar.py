"""Sidecars say how frames were taken: read strictly, the nearest first, compared with their units."""

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from runner.capture.integrity import load, survey
from runner.capture.lot import find_lot
from runner.capture.sidecar import Said, SidecarRef, beside, faults, is_sidecar, read_sidecar, remarks, say
from runner.errors import UsageError
from runner.spec.files import Agreed, Sidecar
from runner.spec.model import Capture, Spec
from tests.capture.bad_frames import UNIT, good_unit

SERIALS = "WS8-[0-9]{6}"


def _capture(spec: Spec, **rule: Any) -> Capture:
    return replace(spec.capture("chart"), sidecar=Sidecar(**rule))


def _said(file: str, **values: Any) -> Said:
    return Said(file, {name: (value, f"{file}.json") for name, value in values.items()})


def test_the_nearest_sidecar_counts() -> None:
    """A frame's own file comes before that of the attempt; both names of an own file are known."""
    files = ["a-1.json", "a-1.tif.yaml", "a-10.json", "unit.yml", "a-1.txt", "deep/a-1.json"]
    assert beside("a-1.tif", files) == ["a-1.json", "a-1.tif.yaml", "unit.yml"]
    assert beside("deep/a-1.tif", files) == ["deep/a-1.json", "unit.yml"]
    assert [is_sidecar(name) for name in ("a.JSON", "a.yaml", "a.tif", "json")] == [True, True, False, False]

    near, far = SidecarRef(Path("a"), "a.json"), SidecarRef(Path("u"), "unit.json")
    said = say("a.tif", (near, far), {near: {"gain": 2, "shoe size": 44}, far: {"gain": 3, "exposure": "1 ms"}})
    assert said.values == {"gain": (2, "a.json"), "exposure": ("1 ms", "unit.json")}


@pytest.mark.parametrize(
    ("file", "text", "fields"),
    [
        ("a.json", '{"serial": "WS8-1", "counter": 3, "nested": {"x": [1, null]}}', {"serial": "WS8-1", "counter": 3}),
        ("a.yaml", "serial: 0012\ncounter: 3\nlamp: off\n", {"serial": "0012", "counter": 3, "lamp": "off"}),
        ("a.yml", "exposure: 2 ms\n", {"exposure": "2 ms"}),
        ("a.json", '\ufeff{"gain": 1e1}', {"gain": 10.0}),
    ],
)
def test_both_forms_are_read(file: str, text: str, fields: dict[str, object], tmp_path: Path) -> None:
    """JSON as JSON, YAML with the meaning of a spec: serials keep their zeros, off is a text."""
    (tmp_path / file).write_text(text, encoding="utf-8")

    found = read_sidecar(SidecarRef(tmp_path / file, file))

    assert {name: found[name] for name in fields} == fields


def test_every_cut_of_a_sidecar_is_refused(tmp_path: Path) -> None:
    """A sidecar that is still being written says nothing, wherever it ends."""
    data = json.dumps({"serial": UNIT, "exposure": "2 ms", "counter": 17}).encode()
    path = tmp_path / "a.json"

    for size in range(len(data)):
        path.write_bytes(data[:size])
        with pytest.raises(UsageError, match=r"^a\.json: the sidecar (is empty|cannot be read)"):
            read_sidecar(SidecarRef(path, "a.json"))
    path.write_bytes(b"\xff\xfe\x00")
    with pytest.raises(UsageError, match="it is not utf-8 text"):
        read_sidecar(SidecarRef(path, "a.json"))


@pytest.mark.parametrize(
    ("value", "low", "high", "unit", "good"),
    [
        ("2 ms", 2, 2, "ms", True),
        ("2000 us", 2, 2, "ms", True),
        ("0.002 s", 2, 2, "ms", True),
        ("2.001 ms", 2, 2, "ms", False),
        ("2 ms", None, 2, "ms", True),
        ("1.9999 ms", 2, None, "ms", False),
        ("3 ms", 1, 2, "ms", False),
    ],
)
def test_values_are_compared_with_their_units(
    value: str, low: float | None, high: float | None, unit: str, good: bool, spec: Spec
) -> None:
    """Equal means equal, in whatever unit it is written; both ends of a range belong to it."""
    capture = _capture(spec, agreed=(Agreed("exposure", low, high, unit),))

    told = faults([_said("a.tif", exposure=value)], capture, UNIT, SERIALS)

    assert (told == []) is good
    assert good or ("exposure is" in told[0] and "the spec asks for" in told[0])


def test_serials_count_even_where_nothing_is_asked(spec: Spec) -> None:
    """Another unit's serial is always told; a text that is no serial of units only where a serial is required."""
    capture = _capture(spec)
    assert faults([_said("a.tif", serial="WS8-000999")], capture, UNIT, SERIALS)
    assert faults([_said("a.tif", serial=UNIT.lower())], capture, UNIT, SERIALS) == []
    assert faults([_said("a.tif", serial="SN 4711")], capture, UNIT, SERIALS) == []
    assert faults([_said("a.tif", serial="SN 4711")], _capture(spec, require=("serial",)), UNIT, SERIALS)


def test_counters_tell_lost_and_repeated_frames(spec: Spec) -> None:
    """A counter twice is a fault; a jump is one where consecutive frames are asked for, else a remark."""
    free, strict = _capture(spec), _capture(spec, consecutive=True)
    jump = [_said(f"{n}.tif", counter=n) for n in (7, 8, 11, 10)]
    twice = [_said("a.tif", counter=7), _said("b.tif", counter=8), _said("c.tif", counter=7)]

    assert faults(jump, free, UNIT, SERIALS) == []
    assert remarks(jump, free) == faults(jump, strict, UNIT, SERIALS)
    assert [sentence.split("; ")[0] for sentence in remarks(jump, free)] == [
        "11.tif: counter 11 follows 8 of 8.tif: 2 frames are lost",
        "10.tif: counter 10 follows 11 of 11.tif: the frames are out of order",
    ]
    assert remarks(jump, strict) == []
    assert faults(twice, free, UNIT, SERIALS) == ["c.tif: counter 7 as in a.tif: one frame twice; capture again"]
    shared = [Said(f, {"counter": (3, "unit.json")}) for f in ("a.tif", "b.tif")]
    assert faults(shared, free, UNIT, SERIALS) == []


def test_sidecars_are_no_frames_and_not_unused(tmp_path: Path, spec: Spec) -> None:
    """A pattern that would fit a sidecar takes frames only; a sidecar without its frame is listed as unused."""
    good_unit(tmp_path / UNIT, 100)
    for name in ("chart-1.json", "unit.yaml", "chart-9.json"):
        (tmp_path / UNIT / name).write_text('{"counter": 1, "serial": "WS8-000101"}')

    lot = find_lot(tmp_path, spec)

    assert [ref.file for ref in lot.units[0].attempts[0].frames["chart"]] == ["chart-1.tif", "chart-2.tif"]
    assert lot.unused == (f"{UNIT}/chart-9.json",)
    assert survey(lot, spec).sentences == {}


@pytest.mark.parametrize(
    ("name", "text", "marked"),
    [
        ("chart-1.json", '{"probatum": "simulated frame"}', ["chart-1.tif"]),
        ("chart-1.yaml", "probatum: Simulated frame\n", ["chart-1.tif"]),
        ("unit.json", '{"probatum": "simulated frame"}', ["chart-1.tif", "chart-2.tif"]),
        ("chart-1.json", '{"probatum": "frame", "note": "simulated frame"}', []),
        ("chart-1.json", '{"probatum": "simulated fr', []),
    ],
)
def test_a_sidecar_marks_a_rehearsed_frame(name: str, text: str, marked: list[str], tmp_path: Path, spec: Spec) -> None:
    """A frame that cannot say so itself counts as simulated by its sidecar, and so does its unit, but no other."""
    good_unit(tmp_path / UNIT, 100)
    good_unit(tmp_path / "WS8-000102", 200)
    (tmp_path / UNIT / name).write_text(text)

    lot = find_lot(tmp_path, spec)
    seen = survey(lot, spec)
    chart = spec.capture("chart")
    digests = {file: digest for file, (digest, _) in seen.digests(UNIT, 1).items()}
    frames = load(lot.units[0].attempts[0].frames["chart"], chart.camera, digests)

    assert [frame.file for frame in frames if frame.simulated] == marked
    assert [seen.simulated(serial) for serial in (UNIT, "WS8-000102")] == [bool(marked), False]
    assert [f.file for f in seen.files if f.simulated and "chart" in f.captures] == marked


def test_a_refused_frame_stays_marked(tmp_path: Path, spec: Spec) -> None:
    """A rehearsed file that cannot be read is still none of a real unit's."""
    good_unit(tmp_path / UNIT, 100)
    (tmp_path / UNIT / "chart-1.json").write_text('{"probatum": "simulated frame"}')
    (tmp_path / UNIT / "chart-1.tif").write_bytes(b"II*\0")

    assert survey(find_lot(tmp_path, spec), spec).simulated(UNIT)


def test_the_units_sidecar_speaks_of_every_attempt(tmp_path: Path, spec: Spec) -> None:
    """unit.json beside the attempt folders holds for each of them, where nothing nearer says otherwise."""
    for number in (1, 2):
        good_unit(tmp_path / UNIT / f"attempt-{number}", 100 * number)
    (tmp_path / UNIT / "unit.json").write_text('{"serial": "WS8-000999"}')
    (tmp_path / UNIT / "attempt-2" / "unit.json").write_text(f'{{"serial": "{UNIT}"}}')

    lot = find_lot(tmp_path, spec)
    seen = survey(lot, spec)

    assert lot.unused == ()
    assert seen.faults(UNIT, 2, "chart") == ()
    assert "../unit.json: the sidecar says unit WS8-000999" in seen.faults(UNIT, 1, "chart")[0]
