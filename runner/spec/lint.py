"""Refuses or warns of what a spec asks against logic or physics, limit by limit.

Refused: what no value can meet. Warned of: what no value can fail, what the uncertainty eats, what nobody uses. The
quantities known here by name are those whose natural range or ceiling follows from their definition; the limits of all
others are taken as they are.
"""

import re
from collections.abc import Iterable
from dataclasses import dataclass
from math import hypot, inf
from statistics import NormalDist

from runner.errors import UsageError
from runner.spec import units
from runner.spec.captures import Draft
from runner.spec.ceiling import ceiling, frequency_at
from runner.spec.model import (
    GUARDED_ACCEPTANCE,
    PROOF_EITHER_WAY,
    Amount,
    Camera,
    Limit,
    Optics,
    UncertaintyComponent,
)
from runner.spec.serials import is_serial
from runner.spec.shapes import LimitShape, RootShape
from runner.spec.tree import Complaints, Place

NYQUIST = 0.5
"""cy/px."""
CROSSING = re.compile(r"mtf([1-9][0-9]?)")
"""A frequency at which the transfer function falls to so many per cent."""


@dataclass(frozen=True)
class Range:
    """Values that a quantity can have at all, from its definition."""

    low: float
    """Least."""
    high: float
    """Greatest."""
    unit: str
    """Unit of both."""


NATURAL = {
    "mtf": Range(0, inf, "1"),
    "edge_width": Range(0, inf, "px"),
    "lsf_fwhm": Range(0, inf, "px"),
    "overshoot": Range(0, inf, "1"),
    "undershoot": Range(0, inf, "1"),
    "edge_angle": Range(-45, 45, "deg"),  # from the nearest pixel axis
    "edge_noise": Range(0, inf, "1"),
    "lsf_asymmetry": Range(-1, 1, "1"),
    "phase_transfer": Range(-180, 180, "deg"),
    "edge_modulation": Range(0, 1, "1"),
    "clipped": Range(0, 1, "1"),
    "temporal_noise": Range(0, inf, "DN"),
    "temporal_row_noise": Range(0, inf, "DN"),
    "temporal_column_noise": Range(0, inf, "DN"),
    "fixed_pattern_noise": Range(0, inf, "DN"),
    "row_noise": Range(0, inf, "DN"),
    "column_noise": Range(0, inf, "DN"),
    "total_noise": Range(0, inf, "DN"),
    "level_drift": Range(0, inf, "DN"),
    "luminance_shading": Range(0, 1, "1"),
    "uniformity": Range(0, 1, "1"),
    "darkest_corner": Range(0, inf, "1"),  # of the centre, which need not be the brightest
    "centre_offset": Range(0, 1, "1"),  # of half the diagonal: a maximum lies in the frame
    "colour_shading": Range(0, inf, "1"),
    "row_banding": Range(0, inf, "DN"),
    "column_banding": Range(0, inf, "DN"),
    "row_banding_frequency": Range(0, 0.5, "cy/px"),
    "column_banding_frequency": Range(0, 0.5, "cy/px"),
    "hot_pixels": Range(0, inf, "1"),
    "dead_pixels": Range(0, inf, "1"),
    "dim_pixels": Range(0, inf, "1"),
    "bright_pixels": Range(0, inf, "1"),
    "stuck_pixels": Range(0, inf, "1"),
    "blinking_pixels": Range(0, inf, "1"),
    "blemishes": Range(0, inf, "1"),
    "clusters": Range(0, inf, "1"),
    "largest_cluster": Range(0, inf, "1"),
    "defective_columns": Range(0, inf, "1"),
    "defective_rows": Range(0, inf, "1"),
}
"""Natural ranges; `mtf` is bounded by 1 where the product does not process."""


def lint(
    root: RootShape, drafts: tuple[Draft, ...], declared: Iterable[UncertaintyComponent], found: Complaints
) -> None:
    """Add complaints about limits that cannot be met, cannot fail or cannot be decided.

    Args:
        root: The whole file, for its lines.
        drafts: The captures that could be built.
        declared: The spec's uncertainty components.
        found: Takes the complaints.
    """
    components = tuple(declared)
    _serial(root, found)
    for draft in drafts:
        camera = draft.capture.camera
        if camera.delivers == "jpeg" and not camera.processing and root.camera is not None:
            note = "JPEG frames are processed, yet processing says none"
            found.warn(root.camera.at("delivers"), note, "", "state what the product does, e.g. processing: sharpened")
        for bound in draft.capture.usable_if:
            ends = _Ends(bound.quantity, bound.at_least, bound.at_most, bound.unit)
            _natural(ends, draft, (draft.shape.at("usable_if", bound.quantity),) * 2, found)
        for limit, shape in draft.limits:
            _limit(limit, shape, draft, components, found)


@dataclass(frozen=True)
class _Ends:
    quantity: str
    """Quantity."""
    at_least: float | None
    """Lower end."""
    at_most: float | None
    """Upper end."""
    unit: str
    """Unit of both."""
    combine: str | None = None
    """As in `Limit`."""


def _serial(root: RootShape, found: Complaints) -> None:
    if root.unit is not None and all(is_serial(root.unit.serial, text) for text in ("x", "0", "any (folder) at all")):
        note = "the serial's pattern matches any text: every folder would count as a unit"
        found.warn(root.unit.at("serial"), note, "", "write what a serial looks like, for example 'WS8-[0-9]{6}'")


def _limit(
    limit: Limit, shape: LimitShape, draft: Draft, components: tuple[UncertaintyComponent, ...], found: Complaints
) -> None:
    before = len(found)
    frequency = _frequency(limit, shape, draft, found)
    channels = draft.capture.camera.channels
    if limit.channel is not None and limit.channel not in channels:
        note = f"channel '{limit.channel}' is not in {'mono' if channels == ('mono',) else 'colour'} frames"
        found.error(shape.at("channel"), note, f"one of: {', '.join(channels)}", "leave channel out to mean each")
    elif limit.quantity == "colour_shading":
        _colour_shading(limit, shape, channels, found)
    if limit.part == "lens":
        _lens(shape, draft, found)
    if limit.combine == "range" and limit.at_least is not None and limit.at_least > 0:
        found.warn(shape.at("at_least"), "a range with at_least asks the regions to differ", "", "at_most is usual")
    ends = _Ends(limit.quantity, limit.at_least, limit.at_most, limit.unit, limit.combine)
    _natural(ends, draft, (shape.at(_key(limit, "at_least")), shape.at(_key(limit, "at_most"))), found)
    if limit.combine in {None, "worst", "mean"} and len(found) == before:  # else the ceiling would say it once more
        _ceiling(limit, shape, draft, frequency, found)
    if limit.combine in {None, "worst"}:
        _tolerance(limit, shape, draft, components, found)


def _colour_shading(limit: Limit, shape: LimitShape, channels: tuple[str, ...], found: Complaints) -> None:
    """Warn of a limit that some channel can never meet: it would leave every unit not measured."""
    note, step = "", "write channel: red, and a second limit for blue"
    if "green" not in channels:
        note, step = "frames without colour have no colour shading: no unit can conform", "drop the limit"
    elif limit.channel in {None, "green"}:
        note = "colour shading of red and blue is held against green, which has none itself: no unit can conform"
    if note:
        found.warn(shape.at("channel" if limit.channel else "quantity"), note, "", step)


def _key(limit: Limit, key: str) -> str:
    return "nominal" if limit.nominal is not None else key


def _frequency(limit: Limit, shape: LimitShape, draft: Draft, found: Complaints) -> float | None:
    """Return the frequency in cy/px that the limit is taken at."""
    asked = limit.parameters.get("frequency")
    if asked is None:
        _crossing_beyond_nyquist(limit, shape, draft, found)
        return None
    frequency = _convert(asked.value, asked.unit, "cy/px", draft)
    if frequency is None:
        try:
            units.convert(asked.value, asked.unit, "cy/px", _context(draft))
        except UsageError as error:
            found.error(shape.at("frequency"), error.found, error.allowed, error.next_step)
        return None
    if frequency > NYQUIST and not limit.beyond_nyquist:
        _beyond(units.spell(asked), frequency, shape, "frequency", found)
    return frequency


def _crossing_beyond_nyquist(limit: Limit, shape: LimitShape, draft: Draft, found: Complaints) -> None:
    if not CROSSING.fullmatch(limit.quantity) or limit.beyond_nyquist or limit.combine in {"range", "ratio"}:
        return
    for key, end in (("at_least", limit.at_least), ("at_most", limit.at_most)):
        frequency = None if end is None else _convert(end, limit.unit, "cy/px", draft)
        if end is not None and frequency is not None and frequency > NYQUIST:
            _beyond(units.spell(Amount(end, limit.unit)), frequency, shape, _key(limit, key), found)


def _beyond(asked: str, frequency: float, shape: LimitShape, key: str, found: Complaints) -> None:
    means = "" if asked.endswith("cy/px") else f" ({frequency:.4g} cy/px)"
    note = f"{asked}{means} lies beyond the Nyquist frequency of {NYQUIST:g} cy/px"
    found.error(shape.at(key), note, "", "if that is meant, write beyond_nyquist: true")


def _lens(shape: LimitShape, draft: Draft, found: Complaints) -> None:
    if draft.fill is None:
        note = "part: lens divides out the pixel aperture, but the spec does not state it"
        found.error(shape.at("part"), note, "", "state camera, fill, for example fill: 100 %")
    if not draft.capture.chart.transfer:
        note = "part: lens counts the chart as perfect, for it has no transfer table"
        found.warn(shape.at("part"), note, "", "state chart, transfer")


def _natural(ends: _Ends, draft: Draft, places: tuple[Place, Place], found: Complaints) -> None:
    """Compare limits with the values that the quantity can have at all."""
    span = _range(ends, draft.capture.camera)
    if span is None:
        return
    low, high = (
        None if end is None else _convert(end, ends.unit, span.unit, draft) for end in (ends.at_least, ends.at_most)
    )
    words = ends.quantity.replace("_", " ")
    least, most = (f"{end:g}" + ("" if span.unit == "1" else f" {span.unit}") for end in (span.low, span.high))
    if low is not None and low > span.high:
        found.error(places[0], f"{words} cannot lie above {most}: no value can conform", "", "correct at_least")
    if high is not None and high < span.low:
        found.error(places[1], f"{words} cannot lie below {least}: no value can conform", "", "correct at_most")
    if low is not None and low <= span.low and high is None:
        found.warn(places[0], f"{words} never lies below {least}: this limit cannot fail", "", "correct or drop it")
    if high is not None and high >= span.high and low is None:
        found.warn(places[1], f"{words} never lies above {most}: this limit cannot fail", "", "correct or drop it")


def _range(ends: _Ends, camera: Camera) -> Range | None:
    if ends.combine == "ratio":
        return None
    span = NATURAL.get(ends.quantity)
    if CROSSING.fullmatch(ends.quantity):
        span = Range(0, inf, "cy/px")
    if span is None:
        return None
    if ends.combine == "range":
        return Range(0, span.high - span.low, span.unit)
    return Range(0, 1, "1") if ends.quantity == "mtf" and not camera.processing else span


def _ceiling(limit: Limit, shape: LimitShape, draft: Draft, frequency: float | None, found: Complaints) -> None:
    """Compare limits on the transfer function with what diffraction and pixel allow."""
    camera, optics = draft.capture.camera, draft.capture.optics
    fill = draft.fill if limit.part == "system" else None
    crossing = CROSSING.fullmatch(limit.quantity)
    if limit.quantity == "mtf" and frequency is not None:
        top, unit = ceiling(frequency, camera, optics, fill), "1"
        words = f"an mtf above {top:.3f} at {frequency:.4g} cy/px"
    elif crossing:
        top, unit = frequency_at(int(crossing[1]) / 100, camera, optics, fill), "cy/px"
        words = f"an {limit.quantity} above {top:.4g} cy/px"
    else:
        return
    low, high = (
        None if end is None else _convert(end, limit.unit, unit, draft) for end in (limit.at_least, limit.at_most)
    )
    why = "diffraction" if fill is None else "diffraction and pixel" if _diffracts(camera, optics) else "the pixel"
    if low is not None and low > top:
        note = f"{why} allow no {words[3:]}" if " and " in why else f"{why} allows no {words[3:]}"
        place = shape.at(_key(limit, "at_least"))
        if camera.processing:
            found.warn(place, note, "", f"only processing ({', '.join(camera.processing)}) can lift it there")
        else:
            found.error(place, f"{note}: no value can conform", f"at most {top:.4g}", "correct the limit or the optics")
    if high is not None and high >= top and low is None and not camera.processing and top < (1 if unit == "1" else inf):
        note = f"{words} cannot be, by {why}: this limit cannot fail"
        found.warn(shape.at(_key(limit, "at_most")), note, "", "correct or drop it")


def _diffracts(camera: Camera, optics: Optics) -> bool:
    return ceiling(NYQUIST, camera, optics, None) < 1


def _tolerance(
    limit: Limit, shape: LimitShape, draft: Draft, components: tuple[UncertaintyComponent, ...], found: Complaints
) -> None:
    """Compare a two-sided limit with the declared uncertainty, which every measurement only adds to (JCGM 106:2012)."""
    if limit.at_least is None or limit.at_most is None:
        return
    half = (limit.at_most - limit.at_least) / 2
    middle = (limit.at_most + limit.at_least) / 2
    nearest_zero = 0.0 if limit.at_least <= 0 <= limit.at_most else min(abs(limit.at_least), abs(limit.at_most))
    u, least = (_declared(limit, value, components, draft) for value in (middle, nearest_zero))
    place = shape.at(_key(limit, "at_least"))
    unit = "" if limit.unit == "1" else f" {limit.unit}"
    if limit.rule in {GUARDED_ACCEPTANCE, PROOF_EITHER_WAY} and least > 0:
        best = 2 * NormalDist().cdf(half / least) - 1
        if best < limit.conformance_probability:
            note = (
                f"no value can reach a conformance probability of {limit.conformance_probability:.4g}: the declared "
                f"u of {least:.3g}{unit} allows {best:.3g} at best inside ±{half:.3g}{unit}"
            )
            found.error(place, note, "", "widen the limits, lower the declared uncertainty, or choose another rule")
            return
    if 2 * u > half / 2:
        note = f"the declared uncertainty U = {2 * u:.3g}{unit} exceeds a quarter of the width {2 * half:.3g}{unit}"
        found.warn(place, note, "", "few values will be decided")


def _declared(limit: Limit, value: float, components: tuple[UncertaintyComponent, ...], draft: Draft) -> float:
    total = 0.0
    for one in components:
        if limit.quantity not in one.of:
            continue
        size = (one.relative or 0.0) * abs(value)
        if one.absolute is not None:
            size = _convert(one.absolute.value, one.absolute.unit, limit.unit, draft) or 0.0
        total = hypot(total, size)
    return total


def _context(draft: Draft) -> units.FrequencyContext:
    return units.context_of(draft.capture.camera, draft.capture.optics)


def _convert(value: float, from_unit: str, to_unit: str, draft: Draft) -> float | None:
    """Convert, or return None where the units do not fit (which is told when quantities are bound)."""
    try:
        return units.convert(value, from_unit, to_unit, _context(draft))
    except UsageError:
        return None
