"""File patterns mean what they say: names match whole, parts become axes, and people's order is kept."""

import random

import pytest
from hypothesis import given
from hypothesis import strategies as st

from runner.capture.patterns import natural, read_pattern
from runner.errors import UsageError


@pytest.mark.parametrize(
    ("pattern", "file", "axes"),
    [
        ("chart.tif", "chart.tif", {}),
        ("chart.tif", "Chart.tif", None),
        ("chart.tif", "chart.tif.part", None),
        ("chart.tif", "chartxtif", None),
        ("chart.tif", "chart.tif\n", None),
        ("chart-*.tif", "chart-a b.tif", {}),
        ("chart-*.tif", "chart-.tif", {}),
        ("chart-*.tif", "chart-1/2.tif", None),
        ("*/a.tif", "chart/a.tif", {}),
        ("*/a.tif", "a.tif", None),
        ("dark-{repeat}.tif", "dark-07.tif", {"repeat": "07"}),
        ("dark-{repeat}.tif", "dark-.tif", None),
        ("dark-{repeat}.tif", "dark-a/b.tif", None),
        ("dark-{repeat}.tif", "dark-1 copy.tif", None),
        ("{exposure}ms/z{z}-{repeat}.tif", "2.5ms/z-3-1.tif", {"exposure": "2.5", "z": "-3", "repeat": "1"}),
        ("{a}{b}.tif", "12.tif", {"a": "1", "b": "2"}),
        ("(x)[1]+.tif", "(x)[1]+.tif", {}),
    ],
)
def test_a_pattern_matches_whole_names(pattern: str, file: str, axes: dict[str, str] | None) -> None:
    """A pattern matches the whole relative path, case and all; a star and a named part never reach over a '/'."""
    assert read_pattern(pattern).match(file) == axes


@given(st.dictionaries(st.sampled_from(["repeat", "z", "exposure", "level"]), st.integers(0, 10**6), min_size=1))
def test_every_named_part_comes_back(values: dict[str, int]) -> None:
    """Names made from a pattern's parts give the same parts back, in the order of the pattern."""
    pattern = read_pattern("a" + "_".join(f"{{{name}}}" for name in values) + ".tif")
    file = "a" + "_".join(str(value) for value in values.values()) + ".tif"

    assert pattern.match(file) == {name: str(value) for name, value in values.items()}
    assert pattern.axes == tuple(values)


@pytest.mark.parametrize(
    "text", ["", "/etc/passwd", "../other/*.tif", "a//b.tif", "./a.tif", "C:/a.tif", "a\\b.tif", "a/.."]
)
def test_a_pattern_stays_inside_the_unit(text: str) -> None:
    """A pattern that leads out of the unit's folder is refused with an example of a good one."""
    with pytest.raises(UsageError, match=r"is not a path inside the unit's folder; a relative path .*dark-\{repeat\}"):
        read_pattern(text)


@pytest.mark.parametrize("text", ["{repeat", "repeat}", "{}.tif", "{a}{a}.tif", "{1}.tif", "{a{b}}.tif", "{a-b}.tif"])
def test_wrong_braces_are_refused(text: str) -> None:
    """Braces that are not closed, empty, doubled or odd are refused, not taken as part of a name."""
    with pytest.raises(UsageError, match=r"has a wrong part .*each name once"):
        read_pattern(text)


def test_order_is_that_of_people() -> None:
    """Numbers are sorted by value, numbers inside names too, and what is a plain number comes first."""
    wanted = ["-2", "0.5", "9", "10", "a1", "a2b", "a10", "b", "z2", "z10"]
    mixed = random.Random(4).sample(wanted, len(wanted))

    assert sorted(mixed, key=natural) == wanted


@given(st.lists(st.text(alphabet=st.characters(exclude_categories=()), max_size=12), max_size=8))
def test_any_names_can_be_sorted(names: list[str]) -> None:
    """Whatever characters a file system allows, names have one order, and different names never tie."""
    ordered, backwards = sorted(names, key=natural), names[::-1]

    assert ordered == sorted(backwards, key=natural)
    assert len({natural(name) for name in names}) == len(set(names))


def test_odd_digits_are_no_numbers_that_stop_the_run() -> None:
    """Characters that Unicode calls digits but no number reads can stand in a file name (x⁵, ²)."""
    assert min(["5²", "²", "5", "x⁵"], key=natural) == "5"
