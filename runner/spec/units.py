"""The closed list of units, and conversions between those that belong together.

Every unit is a factor on its kind's base. Spatial frequencies share one base, cycles per pixel along the direction of
the measurement, and the factor of most of them follows from the camera and its optics:

    1 lp/mm on the sensor  = pixel pitch in mm cy/px
    1 lp/mm in the object  = pixel pitch in mm / magnification cy/px
    1 LW/PH                = 1 / (2 × frame height in px) cy/px
    1 cy/deg               = 180/π × pixel pitch / focal length cy/px   (on the axis, object far away)

Conversions are linear, so a standard uncertainty converts by the same factor. Decibels are 20 log10 of an amplitude
ratio; as a logarithm they convert to nothing else here.

References:
    ISO 12233:2024 (LW/PH), ISO 15529:2010 (cycles per length at the sensor); the relations are geometry.
"""

import re
from dataclasses import dataclass
from math import pi

from runner.errors import UsageError
from runner.spec.model import Amount, Camera, Optics
from runner.spec.tree import nearest, number_in


class UnitsError(UsageError):
    """Raised when a unit is not known or two units do not belong together."""


@dataclass(frozen=True)
class FrequencyContext:
    """What a conversion may need to know; None is not stated."""

    pixel_pitch_um: float | None = None
    """Pixel pitch on the sensor, µm."""
    magnification: float | None = None
    """Image size over object size."""
    frame_height: int | None = None
    """Rows of a frame, px."""
    frame_width: int | None = None
    """Columns of a frame, px."""
    focal_length_mm: float | None = None
    """Focal length, mm."""


@dataclass(frozen=True)
class Unit:
    """One unit of the closed list."""

    symbol: str
    """Canonical symbol."""
    kind: str
    """Units of one kind convert into one another."""
    factor: float = 1.0
    """Size in the kind's base unit, before what the context adds."""
    needs: str = ""
    """What the context must state, as a quotient, e.g. `pitch/magnification`."""
    aliases: tuple[str, ...] = ()
    """Other spellings that are read."""


_LIST = (
    Unit("1", "ratio", 1e6),  # whole factors keep 95 % = 0.95 exact
    Unit("%", "ratio", 1e4),
    Unit("ppm", "ratio"),
    Unit("dB", "decibel"),
    Unit("DN", "digital number"),
    Unit("deg", "angle", aliases=("°",)),
    Unit("rad", "angle", 180 / pi),
    Unit("s", "time", 1e6),
    Unit("ms", "time", 1e3),
    Unit("µs", "time", aliases=("us", "μs")),
    Unit("K", "temperature difference"),
    Unit("°C", "temperature", aliases=("degC",)),
    Unit("Hz", "rate"),
    Unit("EV", "exposure ratio"),
    Unit("bit", "binary ratio"),
    Unit("e-", "charge"),
    Unit("DN/e-", "gain"),
    Unit("e-/s", "dark current"),
    Unit("DN/s", "dark signal"),
    Unit("photons", "photons per pixel"),
    Unit("px/mm", "image scale"),
    Unit("px", "length"),
    Unit("nm", "length", 1.0, "1/pitch"),
    Unit("µm", "length", 1e3, "1/pitch", ("um", "μm")),
    Unit("mm", "length", 1e6, "1/pitch"),
    Unit("nm object", "length", 1.0, "magnification/pitch"),
    Unit("µm object", "length", 1e3, "magnification/pitch", ("um object", "μm object")),
    Unit("mm object", "length", 1e6, "magnification/pitch"),
    Unit("cy/px", "spatial frequency"),
    Unit("lp/mm", "spatial frequency", 1e-6, "pitch", ("cy/mm",)),
    Unit("lp/mm object", "spatial frequency", 1e-6, "pitch/magnification", ("cy/mm object",)),
    Unit("LW/PH", "spatial frequency", 0.5, "1/height"),
    Unit("cy/deg", "spatial frequency", 180e-6 / pi, "pitch/focal"),
)
UNITS = {unit.symbol: unit for unit in _LIST}
"""Units by their canonical symbols."""
_SPELLINGS = {spelling: unit for unit in _LIST for spelling in (unit.symbol, *unit.aliases)}
_AMOUNT = re.compile(r"(?P<number>[-+]?[0-9.]+(?:[eE][-+]?[0-9]+)?)\s*(?P<unit>[^0-9.\s].*)?")


def canonical(symbol: str) -> str:
    """Return a unit's canonical symbol.

    Raises:
        UnitsError: The unit is not on the list.
    """
    unit = _SPELLINGS.get(" ".join(symbol.split()))
    if unit is None:
        known = ", ".join(u for u in UNITS if u != "1")
        raise UnitsError(
            f"unknown unit '{symbol}'", allowed=f"known are: {known}", next_step=nearest(symbol, _SPELLINGS)
        )
    return unit.symbol


def parse_amount(text: str) -> Amount:
    """Read `0.25 cy/px`; a bare number is a plain ratio.

    Raises:
        UnitsError: There is no finite number in front, or the unit is not on the list.
    """
    match = _AMOUNT.fullmatch(text.strip())
    value = number_in(match["number"]) if match else None
    if match is None or value is None:
        raise UnitsError(f"'{text}' is no number with a unit", allowed="for example 0.25 cy/px")
    return Amount(float(value), canonical(match["unit"]) if match["unit"] else "1")


def spell(amount: Amount) -> str:
    """Return an amount as `parse_amount` reads it, in shortest decimals."""
    number = f"{amount.value!r}".removesuffix(".0")
    return number if amount.unit == "1" else f"{number} {amount.unit}"


def context_of(camera: Camera, optics: Optics) -> FrequencyContext:
    """Return what a camera and its optics state for conversions."""
    return FrequencyContext(
        camera.pixel_pitch_um, optics.magnification, camera.height, camera.width, optics.focal_length_mm
    )


def convert(value: float, from_unit: str, to_unit: str, context: FrequencyContext) -> float:
    """Convert a value, or its standard uncertainty, between two units of one kind.

    Args:
        value: In `from_unit`.
        from_unit: Symbol.
        to_unit: Symbol; empty stands for `from_unit` (a reported value keeps its own unit).
        context: What the camera and optics state.

    Raises:
        UnitsError: The units are not of one kind, or the context lacks what the conversion needs.
    """
    if not to_unit or canonical(from_unit) == canonical(to_unit):
        return value
    source, target = UNITS[canonical(from_unit)], UNITS[canonical(to_unit)]
    if source.kind != target.kind:
        hint = "a decibel is a logarithm (20 log10 of an amplitude ratio); write both in dB"
        step = hint if "decibel" in {source.kind, target.kind} else ""
        raise UnitsError(
            f"{_words(source)} is no {_words(target)}",
            allowed=f"units of {target.kind}: {_of_kind(target)}",
            next_step=step,
        )
    if source.needs == target.needs:
        return value * source.factor / target.factor
    return value * _size(source, context) / _size(target, context)


def _words(unit: Unit) -> str:
    return f"{unit.kind} ({unit.symbol})" if unit.symbol != "1" else "plain ratio"


def _of_kind(target: Unit) -> str:
    return ", ".join("a plain number" if u.symbol == "1" else u.symbol for u in _LIST if u.kind == target.kind)


def _size(unit: Unit, context: FrequencyContext) -> float:
    """Return a unit's size in its kind's base (cy/px, px)."""
    size = unit.factor
    over, _, under = unit.needs.partition("/")
    for name, power in ((over, 1), (under, -1)):
        if name not in {"", "1"}:
            size *= _stated(name, unit, context) ** power
    return size


def _stated(name: str, unit: Unit, context: FrequencyContext) -> float:
    value, key = {
        "pitch": (_nanometres(context.pixel_pitch_um), "camera, pixel_pitch"),
        "magnification": (context.magnification, "optics, magnification"),
        "height": (context.frame_height, "camera, frame_size"),
        "focal": (context.focal_length_mm, "optics, focal_length"),
    }[name]
    if value is None:
        raise UnitsError(f"{unit.symbol} cannot be converted without {key}", next_step=f"state {key} in the spec")
    return abs(float(value))


def _nanometres(micrometres: float | None) -> float | None:
    return None if micrometres is None else micrometres * 1e3
