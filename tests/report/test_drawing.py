"""Drawings: what they show lies where the figures say, inside the frame, with words for those who do not see it."""

import re
from itertools import pairwise
from typing import Any
from xml.etree import ElementTree as ET

import pytest
from hypothesis import given
from hypothesis import strategies as st
from PIL import ImageFont

from runner.report import drawing
from runner.report.drawing import (
    COLOURS,
    edge_picture,
    margin_picture,
    plain_picture,
    slug,
    strip_picture,
    transfer_picture,
    verdict_shape,
)
from runner.resources import folder

SVG = "{http://www.w3.org/2000/svg}"
CURVE = {"x": [0.0, 0.25, 0.5, 1.0], "y": [1.0, 0.5, 0.2, 0.0], "u": [0.0, 0.01, 0.01, 0.01]}
LETTERS = ImageFont.truetype(str(folder("templates") / "fonts" / "DejaVuSans.ttf"), 40)
FIGURES = st.floats(-1e4, 1e4)


def _check(**more: Any) -> dict[str, Any]:
    known = {
        "quantity": "mtf50",
        "parameters": {},
        "measured_in": "cy/px",
        "value": 0.25,
        "u": 0.01,
        "k": 2,
        "at_least": 0.2,
        "at_most": None,
        "acceptance": {"at_least": 0.2164, "at_most": None},
        "verdict": "conforms",
    }
    return known | more


def _read(svg: str) -> ET.Element:
    return ET.fromstring(svg)  # noqa: S314 - our own text


def _numbers(text: str) -> list[float]:
    return [float(number) for number in re.findall(r"-?\d+(?:\.\d+)?", text)]


def _points(svg: str, kind: str) -> list[list[float]]:
    """Return the numbers of every path of a class."""
    return [_numbers(one.get("d", "")) for one in _read(svg).iter(f"{SVG}path") if one.get("class") == kind]


def _inside(svg: str) -> bool:
    """Tell whether every figure of a drawing lies in its frame."""
    root = _read(svg)
    _, _, wide, high = _numbers(root.get("viewBox", ""))
    xs, ys = [], []
    for one in root.iter():
        path = one.get("d", "")
        numbers = [] if "V" in path else _numbers(path)
        xs += numbers[::2] + [float(one.get(key, "0")) for key in ("x", "cx")]
        ys += numbers[1::2] + [float(one.get(key, "0")) for key in ("y", "cy")]
    return all(0 <= x <= wide for x in xs) and all(0 <= y <= high for y in ys)


def _words_inside(svg: str) -> bool:
    """Tell whether all words lie in the frame as wide as the report's font draws them."""
    root = _read(svg)
    wide = _numbers(root.get("viewBox", ""))[2]
    for one in root.iter(f"{SVG}text"):
        length = LETTERS.getlength(one.text or "") * float(one.get("font-size", "")) / LETTERS.size
        start = float(one.get("x", "")) - {"start": 0, "middle": 0.5, "end": 1}[one.get("text-anchor", "")] * length
        if start < 0 or start + length > wide:
            return False
    return True


def test_each_verdict_has_a_shape_of_its_own() -> None:
    """Verdicts differ without their colours; none is a triangle or a barred circle (ISO 7010: safety signs)."""
    plain = {word: re.sub(r'#[0-9a-f]+|class="[^"]*"', "", verdict_shape(word)) for word in COLOURS}

    assert len(set(plain.values())) == len(COLOURS) == 5
    for word in COLOURS:
        shape = _read(verdict_shape(word, 40))
        assert (shape.get("width"), shape.get("aria-hidden")) == ("40", "true"), "an ornament beside the word"
        corners = {len(_numbers(one.get("d", ""))) for one in shape if one.get("d", "").endswith("Z")}
        assert "polygon" not in verdict_shape(word)
        assert corners <= {6, 8}
        assert word == "cannot decide" or not corners
    assert {one.tag for one in _read(verdict_shape("does not conform"))} == {f"{SVG}rect"}


def test_words_become_class_names() -> None:
    """A verdict's word is one class name."""
    assert slug("does not conform") == "does-not-conform"


def test_a_transfer_curve_lies_on_its_figures() -> None:
    """Equal steps in the figures are equal steps in the drawing; the band holds the curve."""
    svg = transfer_picture(CURVE, [], "centre")
    (curve,) = _points(svg, "curve")
    (band,) = _points(svg, "band-area")

    xs, ys = curve[::2], curve[1::2]
    left, right = xs[0], xs[-1]
    assert [(x - left) / (right - left) for x in xs] == pytest.approx(CURVE["x"], abs=0.001)
    bottom, top = ys[-1], ys[0]
    assert [(y - bottom) / (top - bottom) for y in ys] == pytest.approx(CURVE["y"], abs=0.002)
    assert min(band[1::2]) <= min(ys)
    assert band[3] < curve[3] < band[-3], "above and below the curve at 0.25 cy/px (y runs down)"
    assert _inside(svg)


def test_few_points_are_dots_and_many_a_line() -> None:
    """Five patches are five dots on their figures: between them nothing is known; a dense curve has none."""
    svg = transfer_picture(CURVE, [], "patches")
    dots = [(float(one.get("cx", "")), float(one.get("cy", ""))) for one in _read(svg).iter(f"{SVG}circle")]
    (line,) = _points(svg, "curve")
    dense = {"x": [n / 20 for n in range(21)], "y": [1.0] * 21, "u": []}

    assert [place for dot in dots for place in dot] == pytest.approx(line, abs=0.01)
    assert "<circle" not in transfer_picture(dense, [], "edge")
    assert _inside(svg)


@pytest.mark.parametrize(
    ("name", "unit", "words"),
    [
        ("through focus", "µm", "position, µm"),
        ("level over time", "s", "time, s"),
        ("level over time", "frame", "frame"),
        ("dark level", "s", "exposure time, s"),
        ("spectrum of row means", "cy/px", "spatial frequency, cy/px"),
        ("distortion", "1", "image height over half the diagonal"),
        ("stripe profile", "period", "period"),
    ],
)
def test_the_x_axis_says_what_runs_along_it(name: str, unit: str, words: str) -> None:
    """A unit alone is no axis: µm may be anything; where nothing is known the unit stands alone."""
    svg = plain_picture({"name": name, "x": [0.0, 1.0], "y": [1.0, 2.0], "u": [], "x_in": unit, "y_in": "%"}, name)

    assert words in [one.text for one in _read(svg).iter(f"{SVG}text")]
    assert f"{name}, %" in [one.text for one in _read(svg).iter(f"{SVG}text")]
    assert _inside(svg)
    assert _words_inside(svg)


@pytest.mark.parametrize(
    ("check", "place", "foot"),
    [
        ({"at_least": 0.2}, (0.2, 0.5), (-1, 0)),
        ({"at_least": None, "at_most": 0.3}, (0.3, 0.5), (1, 0)),
        ({"quantity": "mtf10"}, (0.2, 0.1), (-1, 0)),
        ({"quantity": "mtf", "parameters": {"frequency": [0.25, "cy/px"]}, "at_least": 0.4}, (0.25, 0.4), (0, 1)),
        (
            {"quantity": "mtf", "parameters": {"frequency": [0.25, "cy/px"]}, "at_least": None, "at_most": 0.6},
            (0.25, 0.6),
            (0, -1),
        ),
    ],
)
def test_a_limits_foot_points_where_values_are_not_allowed(
    check: dict[str, Any], place: tuple[float, float], foot: tuple[int, int]
) -> None:
    """A bar stands at frequency and modulation of the limit; its foot points to the forbidden side (y runs down)."""
    svg = transfer_picture(CURVE, [_check(**check)], "centre")
    bar, leg = _points(svg, "mark")
    (curve,) = _points(svg, "curve")

    x, y = (bar[0] + bar[2]) / 2, (bar[1] + bar[3]) / 2
    assert (x - curve[0]) / (curve[-2] - curve[0]) == pytest.approx(place[0], abs=0.002)
    assert (curve[-1] - y) / (curve[-1] - curve[1]) == pytest.approx(place[1], abs=0.005)
    assert [(end > start) - (end < start) for start, end in zip(leg[:2], leg[2:], strict=True)] == list(foot)


def test_limits_of_other_kinds_are_not_drawn_on_the_curve() -> None:
    """An overshoot, a frequency in lp/mm and a modulation at one have no place on an axis in cy/px."""
    at = {"quantity": "mtf", "parameters": {"frequency": [80, "lp/mm"]}}
    checks = [_check(quantity="overshoot", measured_in="%"), _check(measured_in="lp/mm"), _check(**at)]

    assert 'class="mark"' not in transfer_picture(CURVE, checks, "centre")


def test_limits_beyond_the_curve_stay_in_the_frame() -> None:
    """The axes reach as far as the limits do."""
    at = {"quantity": "mtf", "parameters": {"frequency": [1.4, "cy/px"]}, "at_most": 1.3, "at_least": None}

    assert _inside(transfer_picture(CURVE, [_check(**at)], "centre"))


def test_an_edge_stands_over_its_residual() -> None:
    """Both share one axis of distances; the residual's strokes start on its zero line."""
    fit = {"x": [-2.0, 0.0, 2.0], "y": [0.0, 0.5, 1.0]}
    residual = {"x": [-2.0, 0.0, 1.0, 9.0], "y": [0.5, -0.5, 0.25, 3.0]}

    strokes = _points(edge_picture(fit, residual, "edge"), "curve")[1]

    starts = [strokes[i + 1] for i in range(0, len(strokes), 3)]
    ends = [strokes[i + 2] for i in range(0, len(strokes), 3)]
    assert len(starts) == 3, "what lies beyond the fit is left out"
    assert len(set(starts)) == 1
    assert ends[0] < starts[0] < ends[1]
    assert (starts[0] - ends[0]) / (starts[0] - ends[2]) == pytest.approx(2, abs=0.1)
    assert len(_points(edge_picture(fit, None, "edge"), "curve")) == 1


@given(
    value=FIGURES,
    u=st.floats(0, 100),
    low=FIGURES,
    width=st.floats(0.001, 1e3),
    kind=st.sampled_from(["lower", "upper", "both"]),
)
def test_a_margin_shows_the_true_order(value: float, u: float, low: float, width: float, kind: str) -> None:
    """The dot lies on the side of each limit that the value lies on, everything inside the drawing."""
    ends = {"at_least": low if kind != "upper" else None, "at_most": low + width if kind != "lower" else None}
    svg = margin_picture(_check(value=value, u=u, acceptance=dict(ends), **ends), "margin")
    (dot,) = [float(one.get("cx", "")) for one in _read(svg).iter(f"{SVG}circle")]
    bars = [points[0] for points in _points(svg, "ink")]

    for limit, bar in zip([end for end in ends.values() if end is not None], bars, strict=True):
        assert (dot - bar) * (value - limit) >= 0 or abs(dot - bar) <= 0.11, "0.1 px of rounding"
    assert _inside(svg)
    assert _words_inside(svg)


def test_words_of_near_limits_do_not_meet() -> None:
    """Two limits that stand close together have their figures on outer sides, distant ones beneath them."""
    near = strip_picture([(5.0, "conforms")], [0.19, 0.21], "strip")
    far = strip_picture([(0.2, "conforms")], [0.19, 0.21], "strip")

    assert [one.get("text-anchor") for one in _read(near).iter(f"{SVG}text")] == ["end", "start"]
    assert [one.get("text-anchor") for one in _read(far).iter(f"{SVG}text")] == ["middle", "middle"]


def test_a_strip_shows_every_unit() -> None:
    """One ring a unit, in order, in the colour of its own verdict, and the limit between those it parts."""
    svg = strip_picture([(0.18, "does not conform"), (0.2, "cannot decide"), (0.25, "conforms")], [0.2], "strip")
    rings = list(_read(svg).iter(f"{SVG}circle"))

    places = [float(ring.get("cx", "")) for ring in rings]
    assert all(a < b for a, b in pairwise(places))
    assert [ring.get("stroke") for ring in rings] == [
        COLOURS[word] for word in ("does not conform", "cannot decide", "conforms")
    ]
    assert [points[0] for points in _points(svg, "ink")] == pytest.approx(places[1:2], abs=0.1)
    assert _inside(svg)
    assert _inside(strip_picture([(0.0, "conforms")], [], "one value, no limit"))
    assert _words_inside(strip_picture([(0.5, "conforms")], [0.0123456789, 0.987654321], "long figures"))
    assert _words_inside(transfer_picture(CURVE, [], "centre"))


def test_words_are_escaped_and_drawings_repeat() -> None:
    """A title with markup stays words; the same figures give the same text; letters are the report's own."""
    title = '<b>"&</b>'
    made = [transfer_picture(CURVE, [_check()], title), margin_picture(_check(), title), strip_picture([], [1], title)]
    again = [transfer_picture(CURVE, [_check()], title), margin_picture(_check(), title), strip_picture([], [1], title)]

    assert made == again
    for svg in made:
        root = _read(svg)
        assert (root.get("role"), root.get("aria-label")) == ("img", title)
        assert {one.get("font-family", "").split(",")[0] for one in root.iter(f"{SVG}text")} == {"Report"}


@given(low=FIGURES, span=st.floats(1e-3, 1e4))
def test_ticks_are_round_and_few(low: float, span: float) -> None:
    """Axis figures are whole multiples of 1, 2 or 5 times a power of ten, inside the axis, never crowded."""
    ticks = drawing._ticks(low, low + span, 5)

    assert len(ticks) <= 13
    assert all(low - 1e-6 * span <= tick <= low + span * (1 + 1e-6) for tick in ticks)
    if len(ticks) > 1:
        step = ticks[1] - ticks[0]
        assert f"{step:.0e}"[0] in "125"
        assert all(b - a == pytest.approx(step, rel=1e-4) for a, b in pairwise(ticks))
