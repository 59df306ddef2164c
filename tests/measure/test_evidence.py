"""The evidence about a unit is everything that was found out, in one fixed order, and marked if any frame is."""

import hashlib
from pathlib import Path

import pytest

from runner.capture.integrity import load, survey
from runner.capture.lot import find_lot
from runner.measure.evidence import CaptureEvidence, FrameFact, UnitEvidence
from runner.measure.plan import bind
from runner.measure.session import measure_attempt, unit_evidence
from runner.spec.build import read_spec
from tests.capture.bad_frames import HEIGHT, SPEC_TEXT, UNIT, WIDTH, good_unit


@pytest.fixture(scope="module")
def unit(tmp_path_factory: pytest.TempPathFactory) -> tuple[UnitEvidence, Path]:
    """Evidence of a good unit with two attempts, and the folder of its frames."""
    root = tmp_path_factory.mktemp("evidence")
    (root / "spec.yaml").write_text(SPEC_TEXT, encoding="utf-8")
    for number in (1, 2):
        good_unit(root / "frames" / UNIT / f"attempt-{number}", 100 * number)
    spec = read_spec(root / "spec.yaml")
    lot, plan = find_lot(root / "frames", spec), bind(spec)
    seen, parts = survey(lot, spec), []
    for attempt in lot.units[0].attempts:
        digests = {file: sha for file, (sha, _) in seen.digests(UNIT, attempt.number).items()}
        parts.append(
            measure_attempt(
                plan,
                attempt.number,
                lambda name, a=attempt, d=digests: load(a.frames[name], spec.capture(name).camera, d),  # type: ignore[misc]
                {},
            )
        )
    return unit_evidence(UNIT, parts), root / "frames" / UNIT


def test_frames_are_told_as_they_are_on_disk(unit: tuple[UnitEvidence, Path]) -> None:
    """Every capture names its files with the digest, shape and type that they have."""
    evidence, folder = unit

    assert [(c.name, c.attempt, len(c.frames)) for c in evidence.captures] == [
        ("dark", 1, 2),
        ("chart", 1, 2),
        ("dark", 2, 2),
        ("chart", 2, 2),
    ]
    for capture in evidence.captures:
        for frame in capture.frames:
            data = (folder / f"attempt-{capture.attempt}" / frame.file).read_bytes()
            assert frame.sha256 == hashlib.sha256(data).hexdigest()
            assert (frame.shape, frame.dtype) == ((HEIGHT, WIDTH), "uint16")


def test_regions_lie_in_the_frame_and_readings_in_regions(unit: tuple[UnitEvidence, Path]) -> None:
    """What was found lies inside the frame; each reading names a region of its capture; each attempt has its own."""
    evidence, _ = unit
    known = {(c.name, c.attempt, region.region) for c in evidence.captures for region in c.regions}

    for capture in evidence.captures:
        for region in capture.regions:
            assert region.box is not None
            x0, y0, x1, y1 = region.box
            assert 0 <= x0 < x1 <= WIDTH
            assert 0 <= y0 < y1 <= HEIGHT
    assert known >= {("chart", 1, "centre"), ("chart", 2, "centre")}
    assert {(r.capture, r.attempt, r.region) for r in evidence.readings} <= known
    values = [r.value for r in evidence.readings if r.quantity == "mtf50" and r.part == "system" and not r.parameters]
    assert len(set(values)) == len(values) >= 2


def test_readings_and_curves_are_in_order(unit: tuple[UnitEvidence, Path]) -> None:
    """Readings go by capture, attempt, region, channel, quantity, curves likewise: same evidence, same file."""
    evidence, _ = unit
    readings = [(r.capture, r.attempt, r.region, r.channel, r.quantity) for r in evidence.readings]
    curves = [(c.capture, c.attempt, c.region, c.channel, c.name) for c in evidence.curves]

    assert len(readings) > 4
    assert readings == sorted(readings)
    assert curves == sorted(curves)


@pytest.mark.parametrize("marked", [None, (0, 0), (1, 2)])
def test_one_marked_frame_makes_the_unit_simulated(marked: tuple[int, int] | None) -> None:
    """A single rehearsed frame in any capture is enough; none is needed for a real unit to be real."""
    captures = tuple(
        CaptureEvidence(
            f"c{c}",
            1,
            "flat field",
            tuple(FrameFact(f"{f}.tif", "", (1, 1), "uint16", simulated=(c, f) == marked) for f in range(3)),
        )
        for c in range(2)
    )

    assert UnitEvidence("S", captures, (), ()).simulated is (marked is not None)
    assert not UnitEvidence("S", (CaptureEvidence("c", 1, "t", (), ("lost",)),), (), ()).simulated


def test_refused_frames_keep_their_mark() -> None:
    """A unit of which nothing may be measured is as simulated as its files say, though no frame is left to tell it."""
    refused = (CaptureEvidence("c", 1, "t", (), ("lost",)),)

    assert UnitEvidence("S", refused, (), (), marked=True).simulated
