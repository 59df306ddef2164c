"""Resolving power by a tri-bar target: the finest element that is resolved, and all coarser ones with it.

An element is resolved where its contrast reaches a stated criterion. The rule stops at the first element, going finer,
that does not: what is seen beyond is spurious resolution, bars and spaces having changed places, and does not count.
Between the last element resolved and the next lies a step of 12 %, of which the uncertainty is 1/√12.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from math import sqrt
from typing import Any, NoReturn

import numpy as np

from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, QuantityInfo, Sample, Scene, Wanted
from runner.measure.numerics.element_table import HORIZONTAL, STEP, VERTICAL, Element, read_elements
from runner.measure.options import number, read_record
from runner.measure.reading import Component, Curve, Reading, Refusal

NAME = "resolving power"
TITLE = "Resolving power by tri-bar elements"
GROUP = "transfer function"
NEEDS = frozenset({"three bars"})
GATHERS = True
REFERENCES = ("MIL-STD-150A (1959) 5.1.1.7 (table of elements)", "JCGM 100:2008 (uncertainty)")
ESTIMATOR = "last element resolved"

DRAWS = 4000
_BARS = {"horizontal": VERTICAL, "vertical": HORIZONTAL}
"""A resolving power along the rows is that of bars which run up and down."""
_ALONG = {"horizontal": "along the rows: bars up and down", "vertical": "along the columns: bars across"}
_QUANTITIES: Mapping[str, QuantityInfo] = {
    f"resolving_power_{way}": QuantityInfo(
        "lp/mm object", f"Frequency on the target of the finest element resolved, {words}.", least=0.0, whole=True
    )
    for way, words in _ALONG.items()
}


@dataclass(frozen=True)
class Options:
    """When an element is resolved."""

    elements: Mapping[str, Element] | None = field(
        default=None,
        metadata={"sentence": "Which element each region holds and how its bars run, e.g. {a: 6/3 vertical}."},
    )
    criterion: float | str = field(
        default=0.1, metadata={"sentence": "Contrast from which an element is resolved, e.g. 10 %."}
    )

    def __post_init__(self) -> None:
        """Read the elements and keep the criterion inside its meaning."""
        if self.elements is not None:
            object.__setattr__(self, "elements", read_elements(self.elements))
        object.__setattr__(self, "criterion", number("criterion", self.criterion, "%", 0.001, 0.9))


@dataclass(frozen=True)
class _Seen:
    """One element with its contrast."""

    element: Element
    """Which."""
    contrast: float
    """Share; 0 where nothing was seen."""
    u: float
    """Its standard uncertainty."""


def read_options(asked: Mapping[str, Any]) -> Options:
    """Read the options from a spec's keys.

    Raises:
        UsageError: A key or value is not allowed.
    """
    return read_record(Options, asked)


def quantity(name: str) -> QuantityInfo | None:
    """Return what a quantity name means, or None."""
    return _QUANTITIES.get(name)


def quantities() -> Mapping[str, QuantityInfo]:
    """Return the quantities."""
    return _QUANTITIES


def measure(sample: Sample, options: Options) -> NoReturn:  # noqa: ARG001 - the contract's form
    """Refuse a single region: the rule needs all elements.

    Raises:
        MeasurementRefused: Always.
    """
    raise MeasurementRefused("not defined", "one element alone has no resolving power")


def gather(scene: Scene, options: Options) -> Measurement:
    """Find the finest element resolved among those of a capture, or of a group.

    Raises:
        MeasurementRefused: Something is wanted and the elements are not named.
    """
    if not options.elements:
        if not scene.wanted:
            return Measurement(())
        found = "the spec does not say which element each region holds: resolving power: {elements: …}"
        raise MeasurementRefused("not defined", found)
    wanted = [one for one in scene.wanted if one.quantity in _QUANTITIES]
    asked = {one.quantity for one in wanted}
    wanted += [Wanted(name, {}, {}) for name in _QUANTITIES if name not in asked]
    readings: list[Reading] = []
    curves: list[Curve] = []
    for one in wanted:
        way = one.quantity.removeprefix("resolving_power_")
        mine = {n: e for n, e in options.elements.items() if n in scene.regions and e.bars == _BARS[way]}
        if not mine and one.quantity not in asked:
            continue
        reading, curve = _resolved(scene, one, way, mine, float(options.criterion))
        readings.append(reading)
        curves += curve
    return Measurement(tuple(readings), tuple(curves))


def _resolved(
    scene: Scene, one: Wanted, way: str, elements: Mapping[str, Element], criterion: float
) -> tuple[Reading, tuple[Curve, ...]]:
    blank = Reading(
        scene.region,
        one.quantity,
        _QUANTITIES[one.quantity].unit,
        None,
        None,
        part=one.part,
        estimator=ESTIMATOR,
        method=REFERENCES[0],
    )
    if one.part != "system":
        return replace(blank, refusal=Refusal("not defined", "bars measure the whole system")), ()
    if not elements:
        because = f"none of its regions holds an element whose bars lie {_ALONG[way].partition(': ')[2]}"
        return replace(blank, refusal=Refusal("not defined", because)), ()
    seen: list[_Seen] = []
    for name, element in sorted(elements.items(), key=lambda pair: pair[1].frequency):
        found = _contrast(scene, name, element, any(each.contrast >= criterion for each in seen))
        if isinstance(found, Refusal):
            return replace(blank, refusal=found), ()
        seen.append(found)
    return _read(blank, seen, criterion), (_curve(scene, way, seen),)


def _contrast(scene: Scene, name: str, element: Element, coarser: bool) -> _Seen | Refusal:
    """Return an element's contrast; nothing seen is 0 where a coarser one is resolved, else it is not measured."""
    lost = [each for each in scene.lost if each.region == name]
    refusal = Refusal(lost[0].cause, lost[0].because) if lost else None
    for reading in scene.steps[0].readings:
        if (reading.region, reading.quantity) == (name, "tri_bar_contrast"):
            if reading.value is not None and reading.u is not None:
                return _Seen(element, reading.value / 100, reading.u / 100)
            refusal = reading.refusal
    if refusal is None:
        refusal = Refusal("not defined", "its contrast was not measured: measure: {tri-bar contrast: {}}")
    if refusal.cause == "no modulation" and coarser:
        return _Seen(element, 0.0, 0.0)
    return Refusal(refusal.cause, f"element {element.words}: {refusal.because}")


def _last(contrasts: np.ndarray[Any, Any], criterion: float) -> np.ndarray[Any, Any]:
    """Return how many elements are resolved, coarse ones first, up to the first that is not; … × elements."""
    return np.asarray(np.cumprod(contrasts >= criterion, axis=-1).sum(axis=-1))


def _read(blank: Reading, seen: Sequence[_Seen], criterion: float) -> Reading:
    contrasts = np.array([each.contrast for each in seen])
    frequencies = np.array([each.element.frequency for each in seen])
    count = int(_last(contrasts, criterion))
    flags = [f"criterion: contrast of {100 * criterion:g} %"]
    again = [e.element.words for e in seen[count:] if abs(e.contrast) >= criterion and abs(e.contrast) > 2 * e.u]
    if again:
        reversed_ = any(each.contrast < 0 for each in seen[count:])
        words = "spurious resolution" if reversed_ else "contrast again"
        flags.append(f"{words} at {', '.join(again)}, beyond the first element that is not resolved")
    if count == 0:
        return replace(blank, bound=("below", float(frequencies[0])), flags=(*flags, "no element is resolved"))
    if count == len(seen):
        return replace(blank, bound=("above", float(frequencies[-1])), flags=(*flags, "every element is resolved"))
    value = float(frequencies[count - 1])
    gap = float(frequencies[count]) - value
    drawn = np.random.default_rng(150).standard_normal((DRAWS, len(seen))) * [each.u for each in seen] + contrasts
    found = np.maximum(_last(drawn, criterion), 1)
    noise = float(np.sqrt(np.mean((frequencies[found - 1] - value) ** 2)))
    parts = (Component("step between elements", gap / sqrt(12), "B"), Component("noise", noise, "A"))
    flags.append(f"element {seen[count - 1].element.words} is the last resolved")
    if gap > 1.5 * (STEP - 1) * value:
        flags.append(f"the next element looked at, {seen[count].element.words}, is not the next of the table")
    kept = tuple(part for part in parts if part.u > 0)
    return replace(blank, value=value, u=sqrt(sum(p.u**2 for p in kept)), components=kept, flags=tuple(flags))


def _curve(scene: Scene, way: str, seen: Sequence[_Seen]) -> Curve:
    return Curve(
        scene.region,
        f"contrast, {way}",
        tuple(each.element.frequency for each in seen),
        tuple(each.contrast for each in seen),
        tuple(each.u for each in seen),
        "lp/mm object",
        "1",
        estimator=ESTIMATOR,
    )
