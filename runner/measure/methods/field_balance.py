"""Balance of a reading over the field: left against right, top against bottom, sagittal against tangential.

Another method of the capture reads one quantity in several regions; here the means of halves of the field are compared.
A region counts to a half where its centre lies clearly on that side. Directions are those of `through focus`.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from math import atan2, degrees, hypot, sqrt
from typing import NoReturn

from runner.errors import MeasurementRefused, UsageError
from runner.measure.contract import Found, Measurement, QuantityInfo, Sample, Scene
from runner.measure.options import lookups, reader
from runner.measure.reading import Component, Reading, Refusal
from runner.spec.model import Amount
from runner.spec.units import parse_amount

NAME = "field balance"
TITLE = "Balance over the field"
GROUP = "transfer function"
NEEDS: frozenset[str] = frozenset()
GATHERS = True
REFERENCES = ("JCGM 100:2008 (uncertainty)", "ISO 9334:2012 (sagittal and tangential directions)")

MIDDLE = 0.05
"""A region whose centre lies nearer to the frame's middle line, as a share of the frame, counts to neither half."""
RADIAL = 30.0
"""deg, as in `through focus`."""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "left_right_balance": QuantityInfo("%", "Mean of the right half minus that of the left, over both.", whole=True),
    "top_bottom_balance": QuantityInfo("%", "Mean of the lower half minus that of the upper, over both.", whole=True),
    "sagittal_tangential_balance": QuantityInfo(
        "%", "Mean of the sagittal regions minus that of the tangential ones, over both.", whole=True
    ),
}


@dataclass(frozen=True)
class Options:
    """Which reading is compared."""

    quantity: str = field(default="mtf50", metadata={"sentence": "Quantity that is compared, e.g. mtf50 or mtf."})
    frequency: str | None = field(default=None, metadata={"sentence": "Frequency of mtf, e.g. 0.25 cy/px."})

    def __post_init__(self) -> None:
        """A frequency has its unit."""
        if self.frequency is not None:
            try:
                good = parse_amount(str(self.frequency)).unit != "1"
            except UsageError:
                good = False
            if not good:
                raise ValueError(f"frequency is {self.frequency!r}; for example 0.25 cy/px")


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def wants(options: Options) -> Sequence[tuple[str, Mapping[str, Amount]]]:
    """Name what another method must read in every region."""
    return ((options.quantity, _parameters(options)),)


def measure(sample: Sample, options: Options) -> NoReturn:  # noqa: ARG001 - the contract's form
    """Refuse a single region.

    Raises:
        MeasurementRefused: Always.
    """
    raise MeasurementRefused("not defined", "one region alone has no balance")


def gather(scene: Scene, options: Options) -> Measurement:
    """Compare the halves of the field.

    Raises:
        MeasurementRefused: Something is wanted, and a region was not found or not measured.
    """
    parameters = _parameters(options)
    readings = [
        r for r in scene.steps[0].readings if r.quantity == options.quantity and dict(r.parameters) == parameters
    ]
    refused = [(r.region, r.refusal) for r in readings if r.refusal is not None]
    refused += [(lost.region, Refusal(lost.cause, lost.because)) for lost in scene.lost]
    refused += [(r.region, Refusal("not defined", f"{r.label} is only a bound")) for r in readings if r.bound]
    if refused and scene.wanted:
        region, why = refused[0]
        raise MeasurementRefused(why.cause, f"{region}: {why.because}")
    values = {r.region: r for r in readings if r.value is not None and r.u is not None}
    placed = [
        (sample.found, values[sample.found.region])
        for sample in scene.steps[0].samples
        if sample.found.region in values
    ]
    width, height = scene.frame_size
    sides: Mapping[str, Callable[[Found], float]] = {
        "left_right_balance": lambda found: _side(sum((found.box.x0, found.box.x1)) / 2 / width),
        "top_bottom_balance": lambda found: _side(sum((found.box.y0, found.box.y1)) / 2 / height),
        "sagittal_tangential_balance": lambda found: direction(found, scene.frame_size),
    }
    return Measurement(tuple(_compared(scene, name, placed, side) for name, side in sides.items()))


def direction(found: Found, frame_size: tuple[int, int]) -> float:
    """Return 1 for a sagittal region (modulation across the radius), -1 for a tangential one, 0 for neither."""
    x, y = (found.box.x0 + found.box.x1) / 2, (found.box.y0 + found.box.y1) / 2
    dx, dy = x - frame_size[0] / 2, y - frame_size[1] / 2
    if "edge_direction" not in found.geometry or hypot(dx, dy) < MIDDLE * hypot(*frame_size):
        return 0.0
    apart = abs((found.geometry["edge_direction"] - degrees(atan2(dy, dx)) + 90) % 180 - 90)
    return -1.0 if apart <= RADIAL else 1.0 if apart >= 90 - RADIAL else 0.0


def _side(place: float) -> float:
    return 1.0 if place > 0.5 + MIDDLE else -1.0 if place < 0.5 - MIDDLE else 0.0


def _parameters(options: Options) -> dict[str, Amount]:
    return {} if options.frequency is None else {"frequency": parse_amount(str(options.frequency))}


def _compared(
    scene: Scene, name: str, placed: Sequence[tuple[Found, Reading]], side: Callable[[Found], float]
) -> Reading:
    blank = Reading(scene.region, name, "%", None, None, estimator="means", method=REFERENCES[0])
    halves = {sign: [r for found, r in placed if side(found) == sign] for sign in (1.0, -1.0)}
    if not all(halves.values()):
        because = f"{len(halves[1.0])} regions lie on one side and {len(halves[-1.0])} on the other"
        return replace(blank, refusal=Refusal("not defined", because))
    plus, minus = (sum(float(r.value or 0) for r in half) / len(half) for half in (halves[1.0], halves[-1.0]))
    middle = (plus + minus) / 2
    if middle <= 0:
        return replace(blank, refusal=Refusal("not defined", "the mean of both sides is not above zero"))
    by_plus, by_minus = minus / middle**2, -plus / middle**2  # derivatives of (plus - minus) / middle
    own = 0.0
    shared: dict[str, float] = {}
    for slope, half in ((by_plus, halves[1.0]), (by_minus, halves[-1.0])):
        for reading in half:
            weight = slope / len(half)
            parts: dict[str, float] = {}
            for c in reading.components:
                if c.shared:
                    parts[c.shared] = parts.get(c.shared, 0.0) + c.u
            own += (weight * float(reading.u or 0)) ** 2 - sum((weight * u) ** 2 for u in parts.values())
            for word, u in parts.items():
                shared[word] = shared.get(word, 0.0) + weight * u
    components = (
        Component("regions", 100 * sqrt(max(0.0, own)), "A"),
        *(Component(word, 100 * abs(u), "B", shared=word) for word, u in sorted(shared.items())),
    )
    u_all = sqrt(sum(part.u**2 for part in components))
    return replace(blank, value=100 * (plus - minus) / middle, u=u_all, components=components)
