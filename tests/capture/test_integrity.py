"""What cannot be evidence is found before anything is measured, and said in a plain sentence."""

import hashlib
import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from runner.capture.integrity import load, survey
from runner.capture.lot import find_lot
from runner.errors import FrameRefused
from runner.spec.model import FramePattern, Spec
from tests.capture.bad_frames import (
    BAD_CAPTURES,
    HEIGHT,
    NEIGHBOUR,
    UNIT,
    WIDTH,
    BadCapture,
    chart_codes,
    dark_codes,
    good_lot,
    good_unit,
    tiff,
)


def _sentences(root: Path, spec: Spec, units: tuple[str, ...] = ()) -> dict[tuple[str, int, str], tuple[str, ...]]:
    return dict(survey(find_lot(root, spec, units), spec).sentences)


@pytest.mark.parametrize("bad", BAD_CAPTURES, ids=lambda bad: bad.name)
def test_staged_error_is_found(bad: BadCapture, tmp_path: Path, spec: Spec) -> None:
    """Each staged error makes its capture unusable with its own sentence, and leaves the other capture alone."""
    good_lot(tmp_path)
    bad.spoil(tmp_path)

    found = _sentences(tmp_path, spec)

    at_fault = found[UNIT, 1 if (UNIT, 1, bad.capture) in found else 2, bad.capture]
    assert any(re.search(bad.says, sentence) for sentence in at_fault), at_fault
    assert all(";" in sentence and "\n" not in sentence for sentence in at_fault)


def test_good_lot_draws_no_sentence(tmp_path: Path, spec: Spec) -> None:
    """What is whole, single and of its unit is left alone."""
    good_lot(tmp_path)

    seen = survey(find_lot(tmp_path, spec), spec)

    assert seen.sentences == {}
    assert seen.marks == {}


def _clamped(seed: int) -> bytes:
    """Return a dark frame clamped at zero, with one hot pixel (0.5 in 10 000) at a place of its own."""
    codes = np.zeros((HEIGHT, WIDTH), np.uint16)
    codes[seed, 7] = 300
    return tiff(codes)


def test_order_processes_and_choice_of_units_change_nothing(tmp_path: Path, spec: Spec) -> None:
    """A frame copied from a neighbour is told to both, asked for or not, by any number of processes."""
    good_lot(tmp_path)
    (tmp_path / UNIT / "chart-2.tif").write_bytes((tmp_path / NEIGHBOUR / "chart-1.tif").read_bytes())

    whole = survey(find_lot(tmp_path, spec), spec)

    assert set(whole.sentences) == {(UNIT, 1, "chart"), (NEIGHBOUR, 1, "chart")}
    assert f"the same pixels as unit {NEIGHBOUR}, attempt 1, chart-1.tif;" in whole.faults(UNIT, 1, "chart")[0]
    assert f"the same pixels as unit {UNIT}, attempt 1, chart-2.tif;" in whole.faults(NEIGHBOUR, 1, "chart")[0]
    assert survey(find_lot(tmp_path, spec), spec, jobs=2) == whole
    for serial in (UNIT, NEIGHBOUR):
        assert survey(find_lot(tmp_path, spec, [serial]), spec) == whole


def test_clamped_dark_frames_are_flagged_and_no_fault(tmp_path: Path, spec: Spec) -> None:
    """Dark frames clamped at zero are alike by nature; lit frames that are alike are not excused."""
    good_lot(tmp_path)
    spec = replace(spec, captures=tuple(replace(c, camera=replace(c.camera, black_level=0)) for c in spec.captures))
    for serial, first, second in ((UNIT, _clamped(3), _clamped(3)), (NEIGHBOUR, _clamped(3), tiff(dark_codes(9) * 0))):
        (tmp_path / serial / "dark-1.tif").write_bytes(first)
        (tmp_path / serial / "dark-2.tif").write_bytes(second)

    seen = survey(find_lot(tmp_path, spec), spec)

    assert seen.sentences == {}
    assert seen.flags(UNIT, 1, "dark") == tuple(
        f"dark-{n}.tif: nearly every pixel is 0 DN, the dark signal is clamped" for n in (1, 2)
    )
    assert seen.flags(NEIGHBOUR, 1, "dark")[1] == "dark-2.tif: every pixel is 0 DN"

    for repeat in (1, 2):
        (tmp_path / UNIT / f"chart-{repeat}.tif").write_bytes(_clamped(50))
    seen = survey(find_lot(tmp_path, spec), spec)
    assert set(seen.sentences) == {(UNIT, 1, "chart")}
    assert "the same pixels as" in seen.faults(UNIT, 1, "chart")[0]


def test_the_same_file_in_two_attempts_is_told(tmp_path: Path, spec: Spec) -> None:
    """A second attempt must be captured anew: a copy of the first one's frame is told to both attempts."""
    for number in (1, 2):
        good_unit(tmp_path / UNIT / f"attempt-{number}", 100 * number)
    source, copy = (tmp_path / UNIT / f"attempt-{n}" / "chart-1.tif" for n in (1, 2))
    copy.write_bytes(source.read_bytes())

    seen = survey(find_lot(tmp_path, spec), spec)

    assert "the same pixels as attempt 1, chart-1.tif;" in seen.faults(UNIT, 2, "chart")[0]
    assert "the same pixels as attempt 2, chart-1.tif;" in seen.faults(UNIT, 1, "chart")[0]
    assert seen.faults(UNIT, 1, "dark") == ()


def test_digests_are_of_the_files(tmp_path: Path, spec: Spec) -> None:
    """Each file's digest is the one that any other program computes of it; a refused file has none."""
    good_lot(tmp_path)
    (tmp_path / UNIT / "chart-2.tif").write_bytes(b"no picture")

    seen = survey(find_lot(tmp_path, spec), spec).digests(UNIT, 1)

    files = ["chart-1.tif", "dark-1.tif", "dark-2.tif"]
    assert sorted(seen) == files
    assert [seen[f][0] for f in files] == [
        hashlib.sha256((tmp_path / UNIT / f).read_bytes()).hexdigest() for f in files
    ]


def test_frames_are_measured_only_as_they_were_looked_through(tmp_path: Path, spec: Spec) -> None:
    """A file that changes between the survey and the measurement is refused, though it would be sound by itself."""
    good_lot(tmp_path)
    lot = find_lot(tmp_path, spec, [UNIT])
    digests = {file: sha for file, (sha, _) in survey(lot, spec).digests(UNIT, 1).items()}
    refs = lot.units[0].attempts[0].frames["chart"]

    frames = load(refs, spec.camera, digests)

    assert [(frame.file, frame.axes) for frame in frames] == [(f"chart-{n}.tif", {"repeat": str(n)}) for n in (1, 2)]
    (tmp_path / UNIT / "chart-2.tif").write_bytes(tiff(chart_codes(77)))
    with pytest.raises(FrameRefused, match=r"chart-2\.tif: the file changed while the run was going on; let the"):
        load(refs, spec.camera, digests)


@pytest.mark.parametrize(
    ("file", "says"),
    [
        ("chart-WS8-000102.tif", "the name says unit WS8-000102, the file lies with WS8-000101"),
        ("WS8-000999_chart-2.tif", "the name says unit WS8-000999"),
        ("chart-WS8-000101.tif", ""),
        ("chart-20261201.tif", ""),
        ("chart-XWS8-0001027.tif", ""),
    ],
)
def test_only_another_units_serial_in_a_name_is_foreign(file: str, says: str, tmp_path: Path, spec: Spec) -> None:
    """Whole words of a name that are another serial are told; the unit's own, dates and longer words are not."""
    spec = replace(spec, captures=(spec.captures[0], replace(spec.captures[1], frames=FramePattern("*chart-*"))))
    good_lot(tmp_path)
    (tmp_path / UNIT / "chart-2.tif").rename(tmp_path / UNIT / file)

    faults = survey(find_lot(tmp_path, spec), spec).faults(UNIT, 1, "chart")

    assert len(faults) == bool(says)
    assert not says or says in faults[0]


def test_saturated_frames_are_flagged_and_no_copies(tmp_path: Path, spec: Spec) -> None:
    """Two frames at white but for one dead pixel are alike by nature; with a thousand dead ones they are copies."""
    good_unit(tmp_path / UNIT, 100)
    codes = np.full((HEIGHT, WIDTH), 4095, dtype=np.uint16)
    for dead, told in ((1, ()), (1000, ("the same pixels",))):
        codes.reshape(-1)[1 : dead + 1] = 70
        for number in (1, 2):
            (tmp_path / UNIT / f"chart-{number}.tif").write_bytes(tiff(codes))
        seen = survey(find_lot(tmp_path, spec), spec)
        assert any("at the white level" in mark for mark in seen.remarks(UNIT)) == (dead == 1)
        assert all(any(words in sentence for sentence in seen.faults(UNIT, 1, "chart")) for words in told)
        assert bool(seen.faults(UNIT, 1, "chart")) == bool(told)
