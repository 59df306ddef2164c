"""Photon transfer: gain, dark noise, saturation, dynamic range, linearity and patterns of a sensor in electrons.

Taken from pairs (or more frames) of an even field at several levels of light, from darkness to beyond saturation, and
from darks: `uses: {dark: …}`, at the same exposure times if these differ, or levels without light in the series.
Frames must be the sensor's own: linear, not filtered, no lens, light even within 3 % over the field.

Where the lamp is bright, keep to the local rules for optical radiation at the workplace: never look into it.
"""

from collections.abc import Iterator
from contextlib import suppress
from dataclasses import dataclass, field, replace
from math import sqrt

from runner.errors import MeasurementRefused, UsageError
from runner.measure import photon_figures as figures
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.light_levels import LevelFrames, Series, series
from runner.measure.options import lookups, number, reader
from runner.measure.photon_levels import Dark, Point, Unevenness, correlation, darks, points, unevenness
from runner.measure.photon_results import Transfer, linearity, transfer
from runner.measure.reading import Curve, Reading, Refusal
from runner.spec.units import parse_amount, spell

NAME = "photon transfer"
TITLE = "Photon transfer of a linear sensor"
GROUP = "sensor"
TOGETHER = True
AXES = frozenset({"level", "exposure"})
NEEDS = frozenset({"uniform"})
REFERENCES = (
    "EMVA Standard 1288 Release 4.0 Linear (2021)",
    "J. R. Janesick, Photon Transfer, SPIE Press (2007)",
    "JCGM 100:2008 (uncertainty)",
)
ESTIMATOR = "photon transfer"

MOST_ORDER = 6
"""Highest order of shading that may be taken off."""
MOST_UNEVEN = 0.2
"""Beyond, pixels saturate at levels so different that the series tells of no one sensor."""
MOST_ALIKE = 0.35
"""Correlation of neighbours' noise from which on frames were filtered: means of two pixels have 0.5, of 3 × 3 0.67.

Scintillators, crosstalk and slow amplifiers give up to 0.25; the gain then reads low, which is said.
"""

_WORDS = {
    "_row": "that is common to a row",
    "_column": "that is common to a column",
    "_pixel": "that single pixels have",
}
_QUANTITIES: dict[str, QuantityInfo] = {
    "system_gain": QuantityInfo("DN/e-", "Codes for one electron: slope of variance over mean.", least=0.0),
    "temporal_dark_noise": QuantityInfo("e-", "Noise of darks from frame to frame, rounding taken off.", least=0.0),
    "temporal_dark_noise_dn": QuantityInfo("DN", "The same in codes, with what rounding adds.", least=0.0),
    "saturation_capacity": QuantityInfo(
        "e-", "Electrons at the light where the temporal variance is greatest; not the full well.", least=0.0
    ),
    "dynamic_range_emva1288": QuantityInfo("dB", "Saturation over absolute sensitivity threshold, 20 log10."),
    "dynamic_range_emva1288_bits": QuantityInfo("bit", "The same as a power of two."),
    "absolute_sensitivity_threshold": QuantityInfo("e-", "Electrons whose signal is as large as its noise.", least=0.5),
    "absolute_sensitivity_threshold_photons": QuantityInfo(
        "photons", "Photons per pixel that give them; needs light in photons.", least=0.0
    ),
    "snr_max": QuantityInfo("dB", "Signal over noise at saturation, root of its electrons, 20 log10."),
    "linearity_error_emva1288": QuantityInfo(
        "%",
        "Mean size of the relative departures from a straight line over 5 to 95 % of saturation, by Release 4.0; "
        "Release 3.0 took half the span of departures in codes over another range: its numbers are not comparable.",
        least=0.0,
    ),
    "quantum_efficiency": QuantityInfo("%", "Electrons for one photon; needs light in photons.", least=0.0, most=100.0),
    "dark_current": QuantityInfo("e-/s", "Rise of the dark level over exposure time."),
    "dark_current_from_variance": QuantityInfo(
        "e-/s", "The same from the variance of darks, for cameras that hold their dark level."
    ),
    "light_unevenness": QuantityInfo(
        "%", "Greatest less least light of blocks of the field over the mean, at half of saturation.", least=0.0
    ),
}
for _end in figures.PARTS:
    _words = _WORDS.get(_end)
    _QUANTITIES[f"dsnu1288{_end}"] = QuantityInfo(
        "e-",
        f"Part of dsnu1288 {_words}." if _words else "Pattern of darks over the field, standard deviation.",
        least=0.0,
    )
    _QUANTITIES[f"prnu1288{_end}"] = QuantityInfo(
        "%",
        f"Part of prnu1288 {_words}." if _words else "Pattern of the response at half of saturation, over the signal.",
        least=0.0,
    )
_ONLY_ASKED = (
    "quantum_efficiency",
    "absolute_sensitivity_threshold_photons",
    "dark_current",
    "dark_current_from_variance",
)
"""Quantities that need more than the series; without it they are refused only where a limit asks for them."""


@dataclass(frozen=True)
class Options:
    """What a light series is taken with."""

    frames_per_level: int = field(
        default=0,
        metadata={
            "sentence": "Frames of one level that follow one another, where names tell no level, as in files of many "
            "pages; 0 goes by names and sidecars."
        },
    )
    light: tuple[str, ...] = field(
        default=(), metadata={"sentence": "Amounts of light, one for each level, in place of names and sidecars."}
    )
    plain_numbers: str = field(
        default="light",
        metadata={
            "sentence": "What a number without a unit in a name is: light (an amount) or order (a place in a row)."
        },
    )
    photons: float = field(
        default=0.0,
        metadata={"sentence": "Photons that reach one pixel at the brightest level, by a calibrated detector; or 0."},
    )
    photons_u: float = field(
        default=0.03, metadata={"sentence": "Relative standard uncertainty of photons; EMVA 1288 expects 3 %."}
    )
    shading_order: int = field(
        default=0,
        metadata={
            "sentence": f"Order of the polynomial shading that is no pattern, 0 to {MOST_ORDER}; 0 keeps all, as "
            "EMVA 1288 defines DSNU and PRNU."
        },
    )

    def __post_init__(self) -> None:
        """Keep each option inside its meaning."""
        for name, most in (("frames_per_level", 10_000), ("shading_order", MOST_ORDER)):
            value = getattr(self, name)
            if isinstance(value, bool) or not isinstance(value, int) or not 0 <= value <= most:
                raise ValueError(f"{name} is {value!r}; allowed are whole numbers from 0 to {most}")
        if self.frames_per_level == 1:
            raise ValueError("frames_per_level is 1; a level needs 2 frames at least")
        if self.plain_numbers not in {"order", "light"}:
            raise ValueError(f"plain_numbers is {self.plain_numbers!r}; allowed are order, light")
        object.__setattr__(self, "light", _amounts(self.light))
        object.__setattr__(self, "photons", number("photons", self.photons, "photons", 0.0, 1e12))
        object.__setattr__(self, "photons_u", number("photons_u", self.photons_u, "%", 0.0, 1.0))


def _amounts(asked: object) -> tuple[str, ...]:
    """Return amounts as a spec writes them."""
    if not isinstance(asked, (list, tuple)):
        raise ValueError(f"light is {asked!r}; allowed is a list of amounts, e.g. [1 ms, 2 ms]")  # noqa: TRY004
    try:
        found = [parse_amount(str(one)) for one in asked]
    except UsageError as error:
        raise ValueError(f"light holds what is no amount: {error.found}") from error
    if any(one.value < 0 for one in found):
        raise ValueError(f"light holds {min(one.value for one in found):g}; an amount of light is 0 or more")
    return tuple(spell(one) for one in found)


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure a light series in one region and channel.

    Raises:
        MeasurementRefused: No darks, single frames, too little or too much light, mixed-up levels, frames that are not
            the sensor's own, uneven light.
    """
    camera = sample.camera
    if camera.tone.kind != "linear":
        raise MeasurementRefused(
            "not defined",
            f"the camera's tone is {camera.tone.kind}: EMVA 1288 Linear is for cameras whose codes are linear in light",
            next_step="give frames with a linear tone",
        )
    found = series(
        sample.frames,
        frames_per_level=options.frames_per_level,
        light=[parse_amount(one) for one in options.light],
        plain_is_light=options.plain_numbers == "light",
    )
    without, lit = _dark_frames(sample, found, options)
    of = transfer(points(lit, without, options.shading_order), without, found.light_in)
    half = _half(of)
    uneven = _refuse_foreign(half)
    return Measurement(tuple(_readings(sample, of, half, without, uneven, options)), tuple(_curves(sample, of, half)))


def _dark_frames(sample: Sample, found: Series, options: Options) -> tuple[tuple[Dark, ...], list[LevelFrames]]:
    """Return the darks, and the levels that have light: darks are a companion, or levels without light."""
    own = [level for level in found.levels if level.light == 0]
    lit = [level for level in found.levels if level.light != 0]
    companions = sample.companions.get("dark", ())
    if companions:
        own = _by_exposure(series(companions, frames_per_level=0).levels)
    if not own:
        name = sample.lost_companions.get("dark")
        because = f"the capture '{name}' gave no frames" if name else "nothing was captured without light"
        raise MeasurementRefused(
            "missing companion", because, next_step="capture dark frames, and name them in uses: {dark: …}"
        )
    if not lit:
        raise MeasurementRefused("too dark", "no level of the series has light")
    return darks(own, options.shading_order), lit


def _by_exposure(levels: tuple[LevelFrames, ...]) -> list[LevelFrames]:
    """Return darks by exposure time alone: without light their level says nothing."""
    groups: dict[tuple[float | None, str], list[LevelFrames]] = {}
    for level in levels:
        groups.setdefault((level.exposure, level.mark), []).append(level)
    return [replace(some[0], crops=tuple(c for one in some for c in one.crops)) for some in groups.values()]


def _half(of: Transfer) -> Point:
    """Return the level nearest to half of saturation."""
    lit = [one for one in of.points if one.signal > 0]
    return min(lit, key=lambda one: abs(one.signal - of.top / 2))


def _refuse_foreign(half: Point) -> Unevenness:
    """Refuse frames that hold no even field or are not the sensor's own; return how uneven the light is."""
    uneven = unevenness(half)
    if uneven.span > MOST_UNEVEN:
        raise MeasurementRefused(
            "uneven",
            f"at {half.label} the light varies by {100 * uneven.span:.0f} % over the field",
            allowed=f"{100 * figures.EVEN:g} % for EMVA 1288, {100 * MOST_UNEVEN:g} % at most",
            next_step="light the bare sensor evenly, or choose a smaller region",
        )
    alike = max(correlation(half))
    if alike > MOST_ALIKE:
        raise MeasurementRefused(
            "outside the estimator's limits",
            f"the noise of neighbouring pixels is correlated by {alike:.2f}: the frames were filtered or interpolated",
            allowed=f"{MOST_ALIKE:g} at most",
            next_step="give frames as the sensor delivers them",
        )
    return uneven


def _readings(
    sample: Sample, of: Transfer, half: Point, without: tuple[Dark, ...], uneven: Unevenness, options: Options
) -> Iterator[Reading]:
    asked = {one.quantity for one in sample.wanted}
    given: figures.Figures = {
        **figures.electrons(of),
        **figures.patterns(of, half, uneven.span, options.shading_order),
        "linearity_error_emva1288": lambda: figures.departure(of),
        "light_unevenness": lambda: figures.spread_of_light(uneven),
        **figures.photons(of, options.photons, options.photons_u),
        "dark_current": lambda: figures.rise_in_darkness(of, without, by_variance=False),
        "dark_current_from_variance": lambda: figures.rise_in_darkness(of, without, by_variance=True),
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
            made = figure()
        except MeasurementRefused as error:
            if name not in _ONLY_ASKED or name in asked:
                yield replace(blank, refusal=Refusal(error.cause, str(error)))
            continue
        if made.value is None:
            yield replace(blank, bound=made.bound, flags=made.flags)
        else:
            yield replace(blank, value=made.value, u=made.u, components=made.parts, flags=made.flags)


def _curves(sample: Sample, of: Transfer, half: Point) -> Iterator[Curve]:
    lit = [one for one in of.points if one.signal > 0]
    region = sample.found.region
    signal = tuple(one.signal for one in lit)
    yield Curve(
        region,
        "photon transfer",
        signal,
        tuple(one.variance for one in lit),
        tuple(one.variance_u for one in lit),
        "DN",
        "DN²",
        estimator=ESTIMATOR,
    )
    noisy = [one for one in lit if one.variance > 0]
    ratios = [one.signal / sqrt(one.variance) for one in noisy]
    yield Curve(
        region,
        "signal-to-noise ratio",
        tuple(one.signal / of.k for one in noisy),
        tuple(ratios),
        tuple(r * one.variance_u / (2 * one.variance) for r, one in zip(ratios, noisy, strict=True)),
        "e-",
        "1",
        estimator=ESTIMATOR,
    )
    with suppress(MeasurementRefused):
        x, y, u = (tuple(float(v) for v in row) for row in figures.total_ratio(of, half))
        yield Curve(region, "total signal-to-noise ratio", x, y, u, "e-", "1", estimator=ESTIMATOR)
    with suppress(MeasurementRefused):
        found, used = linearity(of)
        yield Curve(
            region,
            "linearity",
            tuple(float(one.light or 0.0) for one in used),
            tuple(float(v) for v in found.deviations),
            tuple(float(v) for v in found.u),
            of.light_in,
            "%",
            estimator=ESTIMATOR,
        )
