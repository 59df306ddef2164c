"""Dark current: how the level and the variance of frames without light rise over exposure time.

The level rises by the dark current; the temporal variance rises with it, for its electrons come one by one like those
of light. A camera that holds its dark level by masked pixels shows it in the variance only. Electrons need the system
gain, by photon transfer.
"""

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from math import hypot

from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.light_levels import series
from runner.measure.options import lookups, number, reader
from runner.measure.photon_levels import Dark, darks
from runner.measure.photon_results import dark_current
from runner.measure.reading import Component, Curve, Reading, Refusal

NAME = "dark current"
TITLE = "Dark current over exposure time"
GROUP = "sensor"
TOGETHER = True
AXES = frozenset({"exposure"})
NEEDS = frozenset({"uniform"})
REFERENCES = ("EMVA Standard 1288 Release 4.0 Linear (2021), dark current", "JCGM 100:2008 (uncertainty)")
ESTIMATOR = "line over time"

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "dark_signal": QuantityInfo("DN/s", "Rise of the mean of darks over exposure time."),
    "dark_current": QuantityInfo("e-/s", "The same in electrons, by the option system_gain."),
    "dark_current_from_variance": QuantityInfo(
        "e-/s", "Rise of the temporal variance of darks in electrons, for cameras that hold their dark level."
    ),
}


@dataclass(frozen=True)
class Options:
    """What turns codes into electrons."""

    system_gain: float = field(
        default=0.0, metadata={"sentence": "Codes for one electron, e.g. 0.38 DN/e-, by photon transfer; 0: not known."}
    )
    system_gain_u: float = field(default=0.01, metadata={"sentence": "Its relative standard uncertainty."})

    def __post_init__(self) -> None:
        """Keep each option inside its meaning."""
        object.__setattr__(self, "system_gain", number("system_gain", self.system_gain, "DN/e-", 0.0, 1e6))
        object.__setattr__(self, "system_gain_u", number("system_gain_u", self.system_gain_u, "%", 0.0, 1.0))


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure darks of several exposure times in one region and channel.

    Raises:
        MeasurementRefused: Single frames, frames cut off at code 0, fewer than three known exposure times.
    """
    found = darks(series(sample.frames).levels, 0)
    dark_current(found)  # times first: without them nothing else counts
    return Measurement(tuple(_readings(sample, found, options)), tuple(_curves(sample, found)))


def _readings(sample: Sample, found: Sequence[Dark], options: Options) -> Iterator[Reading]:
    asked = {one.quantity for one in sample.wanted}
    gain, gain_u = options.system_gain, options.system_gain_u
    given: Mapping[str, Callable[[], tuple[float, float, float]]] = {
        "dark_signal": lambda: (*dark_current(found), 0.0),
        "dark_current": lambda: _electrons(dark_current(found), gain, gain_u),
        "dark_current_from_variance": lambda: _electrons(dark_current(found, by_variance=True), gain**2, 2 * gain_u),
    }
    for name, figure in given.items():
        blank = Reading(
            sample.found.region,
            name,
            _QUANTITIES[name].unit,
            None,
            None,
            estimator=ESTIMATOR,
            method=REFERENCES[0],
        )
        try:
            value, noise, of_gain = figure()
        except MeasurementRefused as error:
            if name in asked:
                yield replace(blank, refusal=Refusal(error.cause, str(error)))
            continue
        parts = [Component("noise", noise, "A")]
        if name != "dark_signal":
            parts.append(Component("system gain", of_gain, "B", shared="system gain"))
        yield replace(blank, value=value, u=hypot(*(part.u for part in parts)), components=tuple(parts))


def _electrons(rise: tuple[float, float], gain: float, gain_u: float) -> tuple[float, float, float]:
    """Return a rise in electrons, its noise, and what the gain leaves open."""
    if not gain:
        raise MeasurementRefused(
            "not defined",
            "nothing says how many codes an electron makes",
            next_step="give the option system_gain, or take darks as companion of a light series",
        )
    value, u = rise
    return value / gain, u / gain, abs(value) / gain * gain_u


def _curves(sample: Sample, found: Sequence[Dark]) -> Iterator[Curve]:
    timed = sorted((one for one in found if one.exposure is not None), key=lambda one: one.exposure or 0.0)
    times = tuple(float(one.exposure or 0.0) for one in timed)
    for name, y, u, unit in (
        ("dark level", [one.level for one in timed], [one.level_u for one in timed], "DN"),
        ("dark variance", [one.variance for one in timed], [one.variance_u for one in timed], "DN²"),
    ):
        yield Curve(sample.found.region, name, times, tuple(y), tuple(u), "s", unit, estimator=ESTIMATOR)
