"""Elements are found and held against the table; staged bad captures are told apart."""

import re
from typing import Any

import numpy as np
import pytest
import skimage.data
from scipy.ndimage import gaussian_filter

from runner.errors import UsageError
from runner.measure.contract import Found, NotFound
from runner.measure.targets import tri_bar_elements
from tests.measure.tri_bar_samples import ELEMENTS, SCALE, draw, frame_of, locate, period
from tests.scenes.gratings import GratingScene
from tests.scenes.stars import Values


def test_every_element_is_found_by_its_own_bars() -> None:
    """Periods within 1 % of the table's at 800 px/mm, contrast negative for dark bars, nothing taken from others."""
    for one in locate(frame_of(draw())):
        assert isinstance(one, Found), one
        assert one.geometry["period"] == pytest.approx(period(int(one.region[1])), rel=0.01)
        assert one.geometry["period"] * one.geometry["element_frequency"] == pytest.approx(SCALE, rel=0.01)
        assert (one.geometry["sign"], one.geometry["known"]) == (-1.0, 0.0)


def test_fine_elements_are_known_from_coarse_ones() -> None:
    """Blurred so that elements 5 and 6 are hardly seen, all are found; those take period and direction from others."""
    found = locate(frame_of(draw(0.01, sigma=2.6)))

    assert all(isinstance(one, Found) for one in found)
    known = {one.region: one.geometry for one in found if isinstance(one, Found) and one.geometry["known"]}
    assert {"v6", "h6"} <= set(known)
    assert "v1" not in known
    assert known["v6"]["period"] == pytest.approx(period(6), rel=0.01)
    assert known["h6"]["turn"] % 180 == pytest.approx(90 + np.degrees(0.05), abs=1)


def _photograph(_: Values) -> Values:
    whole: Values = skimage.data.coins()  # type: ignore[no-untyped-call]
    return whole[:112, :336] / 260


CHALLENGES: dict[str, tuple[Any, str, str]] = {
    "lamp off": (lambda light: 0.001 * light, "too dark", "over the black level"),
    "no picture": (lambda light: 0 * light + 0.5, "no picture", "same value"),
    "no chart": (
        lambda light: np.random.default_rng(3).normal(0.5, 0.01, light.shape),
        "no modulation",
        "no three bars stand out in any region",
    ),
    "mirrored": (lambda light: light[:, ::-1], "another scene", "turned or mirrored"),
    "upside down": (lambda light: light[::-1], "another scene", "turned or mirrored"),
    "turned by half": (lambda light: light[::-1, ::-1], "another scene", "turned or mirrored"),
    "moved by two elements": (
        lambda light: np.roll(light, 112, axis=1),
        "another scene",
        "another element|do not follow the table",
    ),
    "stripes": (
        lambda _: GratingScene((336, 112), (0.11, 0.03), noise=0.004).light(np.random.default_rng(2)),
        "another scene",
        "table of elements|turned by 90 degrees|another element",
    ),
    "a photograph": (_photograph, "no modulation", "no three bars stand out"),
    "wholly defocused": (lambda light: gaussian_filter(light, 9), "no modulation", "no three bars stand out"),
}


@pytest.mark.parametrize("name", CHALLENGES)
def test_bad_captures_are_told(name: str) -> None:
    """Each staged bad capture is told by cause and sentence, and half of the regions at least are refused.

    Moved by two elements, the four that are there fit the table at another scale, which nobody has stated.
    """
    spoilt, cause, words = CHALLENGES[name]
    found = locate(frame_of(spoilt(draw())))
    told = {(one.cause, one.because) for one in found if isinstance(one, NotFound)}

    assert any(c == cause and re.search(words, because) for c, because in told), told
    assert sum(isinstance(one, Found) for one in found) <= (8 if name.startswith("moved") else 6)


def test_one_wrong_element_is_told() -> None:
    """Elements 2 and 5 exchanged in one row: those two are refused with both periods, the others are found."""
    light = draw()
    light[:56, 56:112], light[:56, 224:280] = light[:56, 224:280].copy(), light[:56, 56:112].copy()
    lost = {one.region: one for one in locate(frame_of(light)) if isinstance(one, NotFound)}

    assert set(lost) == {"v2", "v5"}
    assert "element 6/2 has" in lost["v2"].because


def test_without_elements_bars_are_found_all_the_same() -> None:
    """No table, no names: each region's own bars, and a region without is told by how little they explain."""
    light = draw()
    light[:56, :56] = np.random.default_rng(5).normal(0.5, 0.01, (56, 56))
    found = {one.region: one for one in locate(frame_of(light), {})}

    assert isinstance(found["v1"], NotFound)
    assert "of the light's variance" in found["v1"].because
    assert all(isinstance(found[name], Found) for name in ELEMENTS if name != "v1")


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"elements": {"a": "6/9 vertical"}}, "element is '6/9 vertical'"),
        ({"elements": "6/1"}, "allowed is a mapping of regions"),
        ({"smoothing": "40 px"}, "smoothing is '40 px'"),
    ],
)
def test_options_are_held_to_their_meaning(options: dict[str, Any], words: str) -> None:
    """No such element, no mapping, too much smoothing: told."""
    with pytest.raises(UsageError, match=words):
        tri_bar_elements.read_options(options)
