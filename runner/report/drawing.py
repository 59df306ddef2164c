"""Small drawings as SVG text, made from the results alone: transfer curves, edge fits, margins, verdict shapes.

Written by hand rather than with a plotting library: six pictures cost 0.1 s on paper in place of 0.6 s, and the bytes
depend on nothing but the figures. Colours stand as attributes for paper; the page's style sheet overrides them by class
for dark screens. Lengths are in px of the drawing.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from html import escape
from math import floor, isfinite, log10
from typing import Any

INK, FAINT, BAND, LINE, MARK = "#1c2126", "#5b646c", "#c9d8e6", "#1f5a8c", "#8c2f1f"
FONT = "Report, DejaVu Sans, sans-serif"
"""`Report` is the font that travels with the program: paper must not depend on what else a machine has."""
COLOURS: Mapping[str, str] = {
    "conforms": "#1b7a3a",
    "does not conform": "#b3261e",
    "cannot decide": "#8a6500",
    "not measured": "#1a56a8",
    "report only": "#5b646c",
}
"""Green, red, yellow (dark enough to read) and blue after IEC 60073; always the third cue after word and shape."""
_WIDE, _HIGH = 300.0, 170.0
_LEFT, _RIGHT, _TOP, _BOTTOM = 34.0, 10.0, 18.0, 31.0
_TICK, _WORD = 9.5, 10.0
"""px: sizes of letters; on paper, where 300 px are 76 mm, they are 7 pt."""
_LETTER = 6.4
"""px: width of a figure of `_WORD` size."""
_FEW = 12
"""Points up to which a curve has a dot at each: between them it is not known."""
_ACROSS: Mapping[str, str] = {
    "through focus": "position",
    "dark level": "exposure time",
    "dark variance": "exposure time",
    "photon transfer": "mean signal",
    "signal-to-noise ratio": "mean signal",
    "linearity": "light",
    "distortion": "image height over half the diagonal",
    "radial chromatic displacement": "image height over half the diagonal",
}
"""What runs along x, by a curve's name."""
_ACROSS_IN: Mapping[str, str] = {"cy/px": "spatial frequency", "s": "time"}
"""The same by its unit, for curves of any name."""
_UNITLESS = frozenset({"", "1"})
_APART = 70.0
"""px: limits nearer than this have their words on outer sides."""


@dataclass(frozen=True)
class Frame:
    """A plot's area and its axes."""

    x: tuple[float, float]
    """Smallest and largest abscissa."""
    y: tuple[float, float]
    """Smallest and largest ordinate."""
    box: tuple[float, float, float, float]
    """Left, top, right, bottom, px."""

    def at(self, x: float, y: float) -> tuple[float, float]:
        """Return a point's place."""
        left, top, right, bottom = self.box
        across = left + (x - self.x[0]) / (self.x[1] - self.x[0]) * (right - left)
        down = bottom - (y - self.y[0]) / (self.y[1] - self.y[0]) * (bottom - top)
        return across, down


def verdict_shape(verdict: str, size: int = 64) -> str:
    """Return the shape of a verdict: our own, none of them a safety sign.

    A filled disc with a tick conforms; a filled square with a bar across does not; a half-filled diamond cannot be
    decided; an open ring of four arcs was not measured.
    """
    colour = COLOURS.get(verdict, INK)
    fill = f'fill="{colour}" class="v-{slug(verdict)}"'
    line = f'fill="none" stroke="{colour}" class="s-{slug(verdict)}"'
    shapes = {
        "conforms": f'<circle cx="32" cy="32" r="30" {fill}/>'
        '<path d="M18 33 L28 43 L47 22" fill="none" stroke="#fff" stroke-width="7" class="s-ground"/>',
        "does not conform": f'<rect x="4" y="4" width="56" height="56" rx="4" {fill}/>'
        '<rect x="14" y="27" width="36" height="10" fill="#fff" class="v-ground"/>',
        "cannot decide": f'<path d="M32 3 L61 32 L32 61 L3 32 Z" {line} stroke-width="5"/>'
        f'<path d="M32 3 L32 61 L3 32 Z" {fill}/>',
        "not measured": f'<circle cx="32" cy="32" r="27" {line} stroke-width="9" stroke-dasharray="28 14.41"/>',
    }
    inner = shapes.get(verdict, f'<circle cx="32" cy="32" r="10" {line} stroke-width="5"/>')
    return f'<svg xmlns="http://www.w3.org/2000/svg" width="{size}" height="{size}" viewBox="0 0 64 64" aria-hidden="true">{inner}</svg>'  # noqa: E501 - one element


def slug(words: str) -> str:
    """Return words as one word for class names."""
    return "-".join(words.split())


def transfer_picture(curve: Mapping[str, Any], checks: Sequence[Mapping[str, Any]], title: str) -> str:
    """Return a transfer curve with its band of ±2u, the Nyquist frequency and the limits that refer to it.

    Args:
        curve: A curve of the results named `mtf`, x in cy/px.
        checks: The region's checks; those on `mtf` and on frequencies in cy/px are marked.
        title: Alternative text.
    """
    xs, ys, us = curve["x"], curve["y"], curve["u"]
    marks = [mark for check in checks for mark in _limit_marks(check)]
    top = 1.05 * max(1.0, *(y for y in ys if isfinite(y)), *(mark.y for mark in marks))
    right = max(xs[-1], 0.5, *(mark.x for mark in marks))
    frame = Frame((0.0, right), (0.0, top), (_LEFT, _TOP, _WIDE - _RIGHT, _HIGH - _BOTTOM))
    parts = [*_axes(frame, _ticks(*frame.x, 5), _ticks(0.0, top, 4), "spatial frequency, cy/px", "mtf")]
    (a, b), (c, d) = frame.at(0.5, 0), frame.at(0.5, top)
    parts.append(_line(a, b, c, d, FAINT, 'stroke-dasharray="3 3"', "faint"))
    parts.append(_text(c + 3, d + 8, "Nyquist", _TICK, "start", FAINT) if right > 0.5 else "")
    (a, b), (c, d) = frame.at(frame.x[0], 0.5), frame.at(frame.x[1], 0.5)
    parts.append(_line(a, b, c, d, FAINT, 'stroke-dasharray="1 3"', "faint"))
    if us:
        upper = [frame.at(x, min(top, y + 2 * u)) for x, y, u in zip(xs, ys, us, strict=True)]
        lower = [frame.at(x, max(0.0, y - 2 * u)) for x, y, u in zip(xs, ys, us, strict=True)]
        parts.append(f'<path d="{_path([*upper, *reversed(lower)])} Z" fill="{BAND}" class="band-area"/>')
    parts.append(
        f'<path d="{_path([frame.at(*p) for p in zip(xs, ys, strict=True)])}" {_stroke(LINE, 1.6)} class="curve"/>'
    )
    parts += _dots(frame, xs, ys)
    parts += [line for mark in marks for line in _drawn(frame, mark)]
    return _svg(parts, _WIDE, _HIGH, title)


@dataclass(frozen=True)
class Mark:
    """A limit's place on a transfer curve."""

    x: float
    """cy/px."""
    y: float
    """Modulation."""
    across: bool
    """It bounds the frequency, not the modulation."""
    sign: float
    """-1 for a lower limit, 1 for an upper one."""


def _limit_marks(check: Mapping[str, Any]) -> list[Mark]:
    """Return the places of a check's limits, if it is on `mtf` at a frequency or on a frequency in cy/px."""
    quantity, frequency = check["quantity"], check["parameters"].get("frequency")
    level = quantity.removeprefix("mtf")
    marks = []
    for limit, sign in ((check["at_least"], -1.0), (check["at_most"], 1.0)):
        if limit is None:
            continue
        if quantity == "mtf" and frequency is not None and frequency[1] == "cy/px":
            marks.append(Mark(frequency[0], limit, across=False, sign=sign))
        elif quantity.startswith("mtf") and level.isdigit() and check["measured_in"] == "cy/px":
            marks.append(Mark(limit, int(level) / 100, across=True, sign=sign))
    return marks


def _drawn(frame: Frame, mark: Mark) -> list[str]:
    """Draw a limit: a short bar with a foot on the side where values are not allowed."""
    x, y = frame.at(mark.x, mark.y)
    foot = 6 * mark.sign
    bar, end = ((0, 7), (x + foot, y)) if mark.across else ((7, 0), (x, y - foot))
    heavy = _line(x - bar[0], y - bar[1], x + bar[0], y + bar[1], MARK, 'stroke-width="2"', "mark")
    return [heavy, _line(x, y, *end, MARK, 'stroke-width="1"', "mark")]


def edge_picture(fit: Mapping[str, Any], residual: Mapping[str, Any] | None, title: str) -> str:
    """Return the fitted edge spread with the fit's residual below it.

    Args:
        fit: A curve named `edge spread`, x in px along the normal, y as a fraction of the step.
        residual: A curve named `residual`, y in % of the step, or None.
        title: Alternative text.
    """
    xs, ys = fit["x"], fit["y"]
    span = (min(xs), max(xs))
    low, high = min(-0.1, *ys), max(1.1, *ys)
    frame = Frame(span, (low, high), (_LEFT, _TOP, _WIDE - _RIGHT, 76.0))
    parts = [*_axes(frame, (), (0.0, 0.5, 1.0), "", "edge")]
    parts.append(
        f'<path d="{_path([frame.at(*p) for p in zip(xs, ys, strict=True)])}" {_stroke(LINE, 1.6)} class="curve"/>'
    )
    if residual is not None and residual["x"]:
        top = max(0.1, 1.1 * max(abs(y) for y in residual["y"]))
        below = Frame(span, (-top, top), (_LEFT, 95.0, _WIDE - _RIGHT, _HIGH - _BOTTOM))
        tick = _nice(top / 1.2)
        parts += _axes(below, _ticks(*span, 6), (-tick, 0.0, tick), "distance from the edge, px", "fit − data, %")
        dots = [below.at(x, y) for x, y in zip(residual["x"], residual["y"], strict=True) if span[0] <= x <= span[1]]
        bars = "".join(f"M{x:.1f} {below.at(0, 0)[1]:.1f}V{y:.1f}" for x, y in dots)
        parts.append(f'<path d="{bars}" {_stroke(LINE, 1)} class="curve"/>')
    return _svg(parts, _WIDE, _HIGH, title)


def plain_picture(curve: Mapping[str, Any], title: str) -> str:
    """Return any curve as it is: a profile, a spectrum of bands.

    Args:
        curve: A curve of the results.
        title: Alternative text.
    """
    xs, ys = curve["x"], curve["y"]
    low, high = min(0.0, *ys), max(ys)
    frame = Frame(
        (min(xs), max(xs) if max(xs) > min(xs) else min(xs) + 1),
        (low, high + 0.05 * ((high - low) or 1.0)),
        (_LEFT + 8, _TOP, _WIDE - _RIGHT, _HIGH - _BOTTOM),
    )
    unit = "" if curve["y_in"] in _UNITLESS else f", {curve['y_in']}"
    parts = _axes(frame, _ticks(*frame.x, 5), _ticks(*frame.y, 4), _across(curve), f"{curve['name']}{unit}")
    points = [frame.at(*p) for p in zip(xs, ys, strict=True)]
    parts.append(f'<path d="{_path(points)}" {_stroke(LINE, 1.4)} class="curve"/>')
    parts += _dots(frame, xs, ys)
    return _svg(parts, _WIDE, _HIGH, title)


def _across(curve: Mapping[str, Any]) -> str:
    """Return what stands at the x axis of any curve: what runs along it where that is known, and its unit."""
    word, unit = _ACROSS.get(curve["name"]) or _ACROSS_IN.get(curve["x_in"], ""), curve["x_in"]
    return ", ".join(one for one in (word, "" if unit in _UNITLESS else unit) if one)


def _dots(frame: Frame, xs: Sequence[float], ys: Sequence[float]) -> list[str]:
    """Draw the points of a curve that has few."""
    if len(xs) > _FEW:
        return []
    places = [frame.at(x, y) for x, y in zip(xs, ys, strict=True) if isfinite(x) and isfinite(y)]
    return [f'<circle cx="{x:.1f}" cy="{y:.1f}" r="2.6" fill="{LINE}" class="dot"/>' for x, y in places]


def margin_picture(check: Mapping[str, Any], title: str) -> str:
    """Return value ± U of a check on a scale with its limit and acceptance limit."""
    value, u = float(check["value"]), float(check["u"] or 0.0)
    wide = check["k"] * u
    limits = [e for e in (check["at_least"], check["at_most"]) if e is not None]
    guards = [e for e in check["acceptance"].values() if e is not None]
    ends = [value - wide, value + wide, *limits, *guards]
    pad = 0.18 * (max(ends) - min(ends)) or abs(value) or 1.0
    frame = Frame((min(ends) - pad, max(ends) + pad), (0.0, 1.0), (6.0, 4.0, 314.0, 40.0))
    colour, name = COLOURS.get(check["verdict"], INK), slug(check["verdict"])
    left, _, right, _ = frame.box
    parts = [_line(left, 22, right, 22, FAINT, "", "faint")]
    low = frame.at(check["at_least"], 0)[0] if check["at_least"] is not None else left
    high = frame.at(check["at_most"], 0)[0] if check["at_most"] is not None else right
    parts.append(
        f'<rect x="{low:.1f}" y="17" width="{max(0.0, high - low):.1f}" height="10" fill="#dfe5ea" class="zone"/>'
    )
    parts += _limits(frame, limits, (6, 38, 50), "limit ")
    for guard in guards:
        if guard not in limits:
            x = frame.at(guard, 0)[0]
            parts.append(_line(x, 11, x, 33, INK, 'stroke-dasharray="2 2"', "ink"))
    a, b, middle = frame.at(value - wide, 0)[0], frame.at(value + wide, 0)[0], frame.at(value, 0)[0]
    style = 'stroke-width="2.5"'
    parts.append(_line(a, 22, b, 22, colour, style, f"s-{name}"))
    parts += [_line(x, 17, x, 27, colour, 'stroke-width="2"', f"s-{name}") for x in (a, b)]
    parts.append(f'<circle cx="{middle:.1f}" cy="22" r="4.5" fill="{colour}" class="v-{name}"/>')
    return _svg(parts, 320.0, 54.0, title)


def strip_picture(values: Sequence[tuple[float, str]], limits: Sequence[float], title: str) -> str:
    """Return all values of one characteristic in a lot on a scale with its limits.

    Args:
        values: Value and verdict of each unit.
        limits: Limits.
        title: Alternative text.
    """
    ends = [v for v, _ in values] + list(limits)
    pad = 0.1 * (max(ends) - min(ends)) or abs(max(ends)) or 1.0
    frame = Frame((min(ends) - pad, max(ends) + pad), (0.0, 1.0), (6.0, 4.0, 394.0, 34.0))
    parts = [_line(6, 19, 394, 19, FAINT, "", "faint")]
    parts += _limits(frame, limits, (4, 34, 46), "")
    for value, verdict in values:
        x = frame.at(value, 0)[0]
        name, colour = slug(verdict), COLOURS.get(verdict, INK)
        parts.append(
            f'<circle cx="{x:.1f}" cy="19" r="4" fill="none" stroke="{colour}" stroke-width="2" class="s-{name}"/>'
        )
    return _svg(parts, 400.0, 48.0, title)


def _limits(frame: Frame, limits: Sequence[float], heights: tuple[float, float, float], word: str) -> list[str]:
    """Draw limits as heavy bars (from, to) with their figures (base line) beneath; figures of two never meet."""
    top, bottom, base = heights
    places = [frame.at(limit, 0)[0] for limit in limits]
    near = max(places, default=0.0) - min(places, default=0.0) < _APART
    anchors = ("end", "start") if len(limits) == 2 and near else ("middle", "middle")
    parts = []
    for limit, x, anchor in zip(limits, places, anchors, strict=False):
        words = f"{word}{limit:.10g}"
        before = {"end": 1.0, "middle": 0.5, "start": 0.0}[anchor] * _LETTER * len(words)
        after = _LETTER * len(words) - before
        inside = min(max(x, frame.box[0] + before), frame.box[2] - after)
        parts.append(_line(x, top, x, bottom, INK, 'stroke-width="2"', "ink"))
        parts.append(_text(inside, base, words, _WORD, anchor, INK))
    return parts


def _axes(frame: Frame, xs: Sequence[float], ys: Sequence[float], x_word: str, y_word: str) -> list[str]:
    left, top, right, bottom = frame.box
    strokes, words = f"M{left:.1f} {top:.1f}V{bottom:.1f}H{right:.1f}", []
    for x in xs:
        place = frame.at(x, frame.y[0])[0]
        strokes += f"M{place:.1f} {bottom:.1f}v3"
        words.append(_text(place, bottom + 13, f"{x:g}", _TICK, "middle", INK))
    for y in ys:
        place = frame.at(frame.x[0], y)[1]
        strokes += f"M{left:.1f} {place:.1f}h-3"
        words.append(_text(left - 5, place + 3, f"{y:g}", _TICK, "end", INK))
    # one path for all strokes: paper takes its time for each element
    parts = [f'<path d="{strokes}" fill="none" stroke="{INK}" class="ink"/>', *words]
    if x_word:
        parts.append(_text((left + right) / 2, bottom + 27, x_word, _WORD, "middle", INK))
    parts.append(_text(left + 4, top - 5, y_word, _WORD, "start", INK))
    return parts


def _ticks(low: float, high: float, about: int) -> tuple[float, ...]:
    step = _nice((high - low) / about)
    first = -floor(-low / step + 1e-9)
    return tuple(round(i * step, 10) for i in range(first, floor(high / step + 1e-9) + 1))


def _nice(size: float) -> float:
    power = 10.0 ** floor(log10(size)) if size > 0 else 1.0
    return power * max(m for m in (1, 2, 5) if m * power <= size * (1 + 1e-9))


def _path(points: Sequence[tuple[float, float]]) -> str:
    return "M" + " L".join(f"{x:.1f} {y:.1f}" for x, y in points if isfinite(x) and isfinite(y))


def _stroke(colour: str, width: float) -> str:
    return f'fill="none" stroke="{colour}" stroke-width="{width:g}"'


def _line(x1: float, y1: float, x2: float, y2: float, colour: str, more: str, name: str) -> str:
    return f'<path d="M{x1:.1f} {y1:.1f}L{x2:.1f} {y2:.1f}" fill="none" stroke="{colour}" class="{name}" {more}/>'


def _text(x: float, y: float, words: str, size: float, anchor: str, colour: str) -> str:
    name = "t-faint" if colour == FAINT else "t-ink"
    place = f'x="{x:.1f}" y="{y:.1f}" font-size="{size:g}" text-anchor="{anchor}"'
    return f'<text {place} font-family="{FONT}" fill="{colour}" class="{name}">{escape(words)}</text>'


def _svg(parts: Sequence[str], wide: float, high: float, title: str) -> str:
    return (
        f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {wide:g} {high:g}" width="{wide:g}" height="{high:g}" '
        f'role="img" aria-label="{escape(title)}">' + "".join(parts) + "</svg>"
    )
