"""What the parts of a spec ask of one another."""

from pathlib import Path

import pytest

from runner.errors import SpecError
from runner.spec.build import read_spec
from runner.spec.relations import _matches, _sample
from tests.scenes.spec_text import TEXT, write

KEPT = TEXT[: TEXT.index("      - {")]


def _told(folder: Path, *limits: str) -> list[str]:
    lines = "".join(f"      - {{characteristic: {i + 1}, {limit}}}\n" for i, limit in enumerate(limits))
    path = write(folder, KEPT + lines)
    try:
        found = read_spec(path).warnings
    except SpecError as refused:
        found = refused.complaints
    told = [f"{complaint.severity}: {complaint.found}" for complaint in found]
    return [line for line in told if "no limit asks for" not in line]


CLASH = "error: characteristics 1 and 2 contradict each other: no value meets both"
IDLE = "warning: characteristic {} is implied by {}: it can only fail where that fails"


M50, M30 = "quantity: mtf50, where: centre, ", "quantity: mtf30, where: centre, "
CORNERS, ONE_CORNER = "quantity: mtf50, where: corners, ", "quantity: mtf50, where: upper left, "
WIDTH = "quantity: edge_width, where: centre, "


def _mtf(frequency: str) -> str:
    return f"quantity: mtf, where: centre, frequency: {frequency}, "


@pytest.mark.parametrize(
    ("first", "second", "told"),
    [
        # one quantity
        (f"{M50}at_least: 0.2 cy/px", f"{M50}at_most: 0.19 cy/px", CLASH),
        (f"{M50}at_least: 0.2 cy/px", f"{M50}at_most: 0.21 cy/px", ""),
        (f"{M50}at_least: 0.2 cy/px", f"{CORNERS}at_most: 0.1 cy/px", ""),
        (f"{M50}at_least: 60 lp/mm", f"{M50}at_most: 0.17 cy/px", CLASH),
        (f"{CORNERS}at_least: 0.2 cy/px", f"{ONE_CORNER}at_least: 0.1 cy/px", IDLE.format(2, 1)),
        (f"{ONE_CORNER}at_least: 0.2 cy/px", f"{CORNERS}at_least: 0.1 cy/px", ""),
        (f"{WIDTH}at_most: 4 px", f"{WIDTH}at_most: 3 px", IDLE.format(1, 2)),
        (f"{WIDTH}at_most: 4 px", f"{WIDTH}at_most: 12 um, rule: simple acceptance", ""),
        # the transfer function at a frequency (0.1 cy/px is 100/3 lp/mm at 3 µm)
        (f"{_mtf('0.1 cy/px')}at_least: 0.6", f"{_mtf('33.3333333333333333 lp/mm')}at_most: 0.5", CLASH),
        (f"{_mtf('0.1 cy/px')}at_least: 0.6", f"{_mtf('0.2 cy/px')}at_most: 0.5", ""),
        # the transfer function and its crossings
        (f"{M50}at_least: 0.2 cy/px", f"{_mtf('0.15 cy/px')}at_most: 0.45", CLASH),
        (f"{_mtf('0.2 cy/px')}at_most: 0.45", f"{M50}at_least: 0.2 cy/px", CLASH),
        (f"{M50}at_least: 0.2 cy/px", f"{_mtf('0.21 cy/px')}at_most: 0.45", ""),
        (f"{M50}at_least: 0.2 cy/px", f"{M30}at_most: 0.19 cy/px", CLASH),
        (f"{M50}at_least: 0.2 cy/px", f"{M30}at_least: 0.19 cy/px", IDLE.format(2, 1)),
        (f"{M50}at_least: 0.2 cy/px", f"{_mtf('0.2 cy/px')}at_least: 0.5", IDLE.format(2, 1)),
        (f"{M50}at_least: 0.2 cy/px", f"{_mtf('0.2 cy/px')}at_least: 0.51", ""),
        (f"{M50}at_least: 0.2 cy/px", f"{_mtf('0.2 cy/px')}at_least: 0.5, estimator: other", ""),
    ],
)
def test_limits_that_contradict_or_imply_each_other(tmp_path: Path, first: str, second: str, told: str) -> None:
    """Two limits that no value meets are refused, one that can only fail with another is warned of, others are not."""
    assert _told(tmp_path, first, second) == ([told] if told else [])


def test_combinations_are_compared_with_their_like(tmp_path: Path) -> None:
    """A range is no value: its limits stand beside those on the values themselves."""
    corners = "quantity: mtf50, where: corners"

    assert _told(tmp_path, f"{corners}, at_least: 0.2 cy/px", f"{corners}, combine: range, at_most: 0.05 cy/px") == []
    tight, loose = (f"{corners}, combine: range, at_most: {end} cy/px" for end in (0.04, 0.05))
    assert _told(tmp_path, tight, loose) == [IDLE.format(2, 1)]


@pytest.mark.parametrize(
    ("pattern", "name", "fits"),
    [
        ("dark-{repeat}.tif", "dark-1.tif", True),
        ("dark-{repeat}.tif", "dark-low-1.tif", True),
        ("dark-{repeat}.tif", "dark-.tif", False),
        ("*.tif", "a/b.tif", False),
        ("a/*.tif", "a/b.tif", True),
        ("a+b.tif", "aab.tif", False),
    ],
)
def test_patterns_match_as_frames_are_found(pattern: str, name: str, fits: bool) -> None:
    """The lint's idea of a pattern is the one by which files are found."""
    from runner.capture.patterns import read_pattern

    assert _matches(pattern, name) == fits
    assert (read_pattern(pattern).match(name) is not None) == fits
    assert _matches(pattern, _sample(pattern))


def test_a_spec_without_limits_is_warned_of(tmp_path: Path) -> None:
    """Where no limit judges anything no unit can ever conform, and the spec says so when it is read."""
    text = KEPT.replace("    limits:\n", "")

    told = [complaint.found for complaint in read_spec(write(tmp_path, text)).warnings]

    assert told[0] == "no limit judges anything: no unit could ever conform"
