"""Elements of a tri-bar target: one pattern of three bars in every region, held against the table of elements.

Regions whose bars are seen clearly tell the target's scale and direction; from them it is known how the bars of finer
elements lie, though nothing of them be seen. Bars that are clear but do not follow the table are another element, or
the target is turned or mirrored.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from math import degrees, pi
from typing import Any

import numpy as np

from runner.capture.frame import Frame, linearise
from runner.measure.contract import Found, NotFound
from runner.measure.numerics.element_table import VERTICAL, Element, read_elements
from runner.measure.numerics.three_bars import ThreeBarFit, fit_three_bars, smoothed
from runner.measure.options import number, read_record
from runner.measure.placing import outline, place
from runner.spec.model import Camera, Region

NAME = "tri-bar elements"
TITLE = "Tri-bar elements"
GROUP = "transfer function"
OFFERS = frozenset({"three bars"})
METHODS = ("tri-bar contrast", "resolving power")
REFERENCES = ("MIL-STD-150A (1959) 5.1.1.7 (table of elements)",)

DARKEST = 0.002
"""Mean light below this share of the range is a dark picture."""
CLEAR, CLEAR_U = 0.75, 8.0
"""Share of the light's variance that bars explain, and contrast over its uncertainty, from which they are clear."""
CLEAR_BLUR = 0.33
"""Blur over the period from which bars run into one dark or bright patch, whose period is anyone's guess."""
TOLERANCE = 0.05
"""Departure of a period from the table; half a step of it is 6 %."""
LEAST_AGREE = 2
"""Clear patterns that must agree on a scale where there are more than one."""


@dataclass(frozen=True)
class Options:
    """The physical target, and how it is looked at."""

    elements: Mapping[str, Element] | None = field(
        default=None,
        metadata={"sentence": "Which element each region holds and how its bars run, e.g. {a: 6/3 vertical}."},
    )
    smoothing: float | str = field(
        default=0.0, metadata={"sentence": "Gaussian that frames are smoothed by first, px (fibre cores); 0 is none."}
    )

    def __post_init__(self) -> None:
        """Read the elements and keep the smoothing inside its meaning."""
        if self.elements is not None:
            object.__setattr__(self, "elements", read_elements(self.elements))
        object.__setattr__(self, "smoothing", number("smoothing", self.smoothing, "px", 0.0, 20.0))


@dataclass(frozen=True)
class _Seen:
    """A region as looked at alone."""

    region: Region
    """The region."""
    box: Any
    """Its box."""
    light: Any
    """Its light."""
    fit: ThreeBarFit | None
    """Bars, if any."""

    @property
    def clear(self) -> bool:
        """Its bars stand out."""
        fit = self.fit
        return (
            fit is not None
            and fit.explained >= CLEAR
            and abs(fit.contrast) >= CLEAR_U * fit.contrast_u
            and fit.sigma <= CLEAR_BLUR * fit.period
        )


def read_options(asked: Mapping[str, Any]) -> Options:
    """Read the options from a spec's keys.

    Raises:
        UsageError: A key or value is not allowed.
    """
    return read_record(Options, asked)


def locate(
    frames: Sequence[Frame], regions: Sequence[Region], camera: Camera, options: Options
) -> Sequence[Found | NotFound]:
    """Find the three bars of each region, and hold them against the table where elements are stated."""
    looked = [_look(frames[0], region, camera, float(options.smoothing)) for region in regions]
    seen = [one for one in looked if isinstance(one, _Seen)]
    elements = options.elements or {}
    if not elements:
        return [_alone(one) if isinstance(one, _Seen) else one for one in looked]
    unnamed = [one for one in seen if one.region.name not in elements]
    named = [one for one in seen if one.region.name in elements]
    scale, turn, sign = _agreed(named, elements)
    found: list[Found | NotFound] = []
    for one in looked:
        if isinstance(one, NotFound):
            found.append(one)
        elif one in unnamed:
            known = ", ".join(elements)
            found.append(
                NotFound(one.region.name, one.box, "not defined", f"elements names no such region, but {known}")
            )
        elif scale is None:
            found.append(_without_scale(one, any(each.clear for each in named)))
        else:
            found.append(_against(one, elements[one.region.name], scale, turn, sign))
    return found


def _look(frame: Frame, region: Region, camera: Camera, smoothing: float) -> _Seen | NotFound:
    box = place(region, frame)
    if isinstance(box, NotFound):
        return box
    light = linearise(frame.codes[box.y0 : box.y1, box.x0 : box.x1], camera)
    level = float(light.mean())
    if level < DARKEST:
        sentence = f"the region lies at {100 * level:.2f} % of the range over the black level"
        return NotFound(region.name, box, "too dark", sentence)
    if np.ptp(light) == 0:
        return NotFound(region.name, box, "no picture", "every pixel of the region has the same value")
    light = smoothed(light, smoothing)
    return _Seen(region, box, light, fit_three_bars(light))


def _agreed(seen: Sequence[_Seen], elements: Mapping[str, Element]) -> tuple[float | None, float, float]:
    """Return scale (px per mm), turn of the rows' direction (rad) and sign of the contrast that most agree on."""
    clear = [(one.fit, elements[one.region.name]) for one in seen if one.clear and one.fit is not None]
    good = [(fit, element) for fit, element in clear if _upright(fit, element)]
    scales = np.array([fit.period * element.frequency for fit, element in good])
    if not scales.size:
        return None, 0.0, 1.0
    near = np.abs(np.log(scales[:, None] / scales[None, :])) < 1.5 * TOLERANCE
    best = int(np.argmax(near.sum(axis=1)))
    agree = near[best]
    if agree.sum() < min(LEAST_AGREE, len(clear)) or agree.sum() < len(clear) / 2:
        return None, 0.0, 1.0
    some = [one for one, ok in zip(good, agree, strict=True) if ok]
    turns = [fit.turn - (0 if element.bars == VERTICAL else _quarter(fit.turn)) for fit, element in some]
    signs = [np.sign(fit.contrast) for fit, _ in some]
    return float(np.median(scales[agree])), float(np.median(turns)), float(np.sign(np.sum(signs)) or 1.0)


def _quarter(turn: float) -> float:
    """Return the quarter turn by which the normal of bars that run along the rows lies off the rows."""
    return pi / 2 if turn >= 0 else -pi / 2


def _upright(fit: ThreeBarFit, element: Element) -> bool:
    """Tell whether bars run as they should, by less than 45 degrees off."""
    return (abs(fit.turn) < pi / 4) == (element.bars == VERTICAL)


def _without_scale(one: _Seen, any_clear: bool) -> NotFound:
    if any_clear:
        sentence = "the regions' bars do not follow the table of elements: another target, or it is turned or mirrored"
        return NotFound(one.region.name, one.box, "another scene", sentence)
    return NotFound(one.region.name, one.box, "no modulation", "no three bars stand out in any region")


def _against(one: _Seen, element: Element, scale: float, turn: float, sign: float) -> Found | NotFound:
    fit, expected = one.fit, scale / element.frequency
    follows = fit is not None and _upright(fit, element) and abs(fit.period / expected - 1) < TOLERANCE
    if one.clear and fit is not None and not _upright(fit, element):
        sentence = (
            f"its bars run {'along the rows' if element.bars == VERTICAL else 'along the columns'}, those of element "
            f"{element.words} {element.bars} do not: the target is turned by 90 degrees or mirrored"
        )
        return NotFound(one.region.name, one.box, "another scene", sentence)
    if one.clear and fit is not None and not follows:
        sentence = (
            f"its bars have a period of {fit.period:.2f} px; element {element.words} has {expected:.2f} px at the "
            f"other elements' {scale:.0f} px/mm: another element, or the target is turned or mirrored"
        )
        return NotFound(one.region.name, one.box, "another scene", sentence)
    if one.clear and fit is not None and follows:
        return _found(one, fit.period, fit.turn, sign, element, known=False)
    across = turn if element.bars == VERTICAL else turn + pi / 2
    return _found(one, expected, across, sign, element, known=True)


def _alone(one: _Seen) -> Found | NotFound:
    if one.clear and one.fit is not None:
        return _found(one, one.fit.period, one.fit.turn, float(np.sign(one.fit.contrast)), None, known=False)
    told = "none" if one.fit is None else f"{100 * one.fit.explained:.0f} %"
    sentence = f"no three bars stand out: they explain {told} of the light's variance, {100 * CLEAR:g} % is needed"
    return NotFound(one.region.name, one.box, "no modulation", sentence)


def _found(one: _Seen, period: float, turn: float, sign: float, element: Element | None, *, known: bool) -> Found:
    geometry = {"period": period, "turn": degrees(turn), "sign": sign, "known": float(known)}
    if element is not None:
        geometry["element_frequency"] = element.frequency
    return Found(one.region.name, one.box, OFFERS, geometry, outline(one.box))
