"""Every figure of a light series by its name: bounds, remarks and refusals where the series does not hold it."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pytest
from scipy import ndimage

from runner.errors import MeasurementRefused
from runner.measure import photon_figures as figures
from runner.measure.light_levels import series
from runner.measure.photon_levels import Point, darks, points
from runner.measure.photon_results import Transfer, transfer
from tests.measure.photon_samples import Shot, camera, lit, sample, unlit
from tests.scenes.photons import Sensor

SENSOR = Sensor(shape=(96, 112))


def _transfer(shots: Sequence[Shot], without: Sequence[Shot], *, plain: bool = True, **more: object) -> Transfer:
    of = camera(shots[0].codes, **more)
    found = series(sample(shots, of=of).frames, plain_is_light=plain)
    black = darks(series(sample(without, of=of).frames).levels, 0)
    return transfer(points(found.levels, black, 0), black, found.light_in)


def _half(of: Transfer) -> Point:
    return min(of.points, key=lambda one: abs(one.signal - of.top / 2))


@pytest.fixture(scope="module")
def short() -> Transfer:
    """Return a series that ends at 60 % of the well."""
    rng = np.random.default_rng(1)
    return _transfer(lit(SENSOR, rng, levels=[n / 8 for n in range(1, 9)], top=6000.0), unlit(SENSOR, rng))


def test_a_series_that_never_saturates_gives_bounds(short: Transfer) -> None:
    """What follows from saturation lies above what was reached; gain and dark noise have values all the same."""
    found = {name: figure() for name, figure in figures.electrons(short).items()}

    assert {name for name, figure in found.items() if figure.value is None} == {
        "saturation_capacity",
        "dynamic_range_emva1288",
        "dynamic_range_emva1288_bits",
        "snr_max",
    }
    side, end = found["saturation_capacity"].bound or ("", 0.0)
    assert side == "above"
    assert end == pytest.approx(6000, rel=0.02)
    assert end < 6000
    assert figures.departure(short).flags[0].startswith("taken over 5 to 95 % of the highest level")
    half = _half(short)
    (flag,) = figures.patterns(short, half, 0.0, 0)["prnu1288"]().flags
    assert flag.endswith("% of the highest level, saturation was not reached")


def test_rounding_bounds_the_dark_noise() -> None:
    """EMVA 1288: at 0.1 DN of dark noise all that is known is 0.40/K; what follows is bounded to its own side."""
    rng = np.random.default_rng(2)
    coarse = replace(SENSOR, gain=0.05, read_noise=2.0, black=100.3)
    of = _transfer(lit(coarse, rng), unlit(coarse, rng), white_level=4095)
    found = {name: figure() for name, figure in figures.electrons(of).items()}

    assert of.rounded
    for name, side, end in (
        ("temporal_dark_noise", "below", 0.39581 / 0.05),
        ("temporal_dark_noise_dn", "below", np.sqrt(0.24)),
        ("absolute_sensitivity_threshold", "below", np.sqrt(0.24 / 0.05**2 + 0.25) + 0.5),
    ):
        bound = found[name].bound or ("", 0.0)
        assert bound[0] == side
        assert bound[1] == pytest.approx(end, rel=0.02)
    assert (found["dynamic_range_emva1288"].bound or ("", 0.0))[0] == "above"
    assert found["saturation_capacity"].value is not None


def test_uneven_light_is_no_pattern_of_the_sensor(short: Transfer) -> None:
    """Beyond 3 % (EMVA 1288) PRNU is refused unless a shading is taken off; DSNU knows no light."""
    half = _half(short)
    with pytest.raises(MeasurementRefused, match=r"the light varies by 4\.0 % over the field, which counts as pattern"):
        figures.patterns(short, half, 0.04, 0)["prnu1288"]()
    assert figures.patterns(short, half, 0.04, 2)["prnu1288"]().value is not None
    assert figures.patterns(short, half, 0.04, 0)["dsnu1288"]().value is not None


def test_unknown_light_leaves_linearity_and_photons_open() -> None:
    """Numbers that are only an order give gain and saturation, no linearity, and no photons for single levels."""
    rng = np.random.default_rng(3)
    shots = [replace(s, axes={"level": str(n // 2), "repeat": str(n % 2)}) for n, s in enumerate(lit(SENSOR, rng))]
    of = _transfer(shots, unlit(SENSOR, rng), plain=False)

    assert figures.electrons(of)["saturation_capacity"]().value == pytest.approx(SENSOR.saturation(), rel=0.02)
    with pytest.raises(MeasurementRefused, match="nothing says how much light each level had; number levels by"):
        figures.departure(of)
    with pytest.raises(MeasurementRefused, match="signals are not in proportion to the light"):
        figures.photons(of, 20_000.0, 0.03)["quantum_efficiency"]()
    with pytest.raises(MeasurementRefused, match="nothing says how many photons reached a pixel"):
        figures.photons(of, 0.0, 0.03)["quantum_efficiency"]()


def test_photons_give_the_quantum_efficiency(short: Transfer) -> None:
    """6000 electrons at 10000 photons are 60 %; the detector's 3 % is shared by all that is told in photons.

    The threshold in photons is that in electrons over it; the gain, which is in both, counts once.
    """
    made = figures.photons(short, 10_000.0, 0.03)
    share, least = made["quantum_efficiency"](), made["absolute_sensitivity_threshold_photons"]()
    electrons = figures.electrons(short)["absolute_sensitivity_threshold"]()

    assert share.value == pytest.approx(60, rel=0.01)
    assert {p.shared for p in (*share.parts, *least.parts) if p.name == "photons"} == {"photons"}
    assert share.u == pytest.approx(float(share.value or 0) * np.hypot(0.03, short.gain.u / short.k), rel=0.02)
    assert least.value == pytest.approx(float(electrons.value or 0) / float(share.value or 1) * 100)
    gain = next(p.u for p in least.parts if p.name == "system gain") / float(least.value or 1)
    assert gain < 0.2 * short.gain.u / short.k  # K σ_d, what darks show, does not depend on the gain


def test_noise_that_neighbours_share_is_said() -> None:
    """A tenth of each pixel spread over its neighbours makes the gain read low; the remark says by how much."""
    rng = np.random.default_rng(4)
    leak = np.array([[0, 0.02, 0], [0.02, 0.92, 0.02], [0, 0.02, 0]])
    shots = [replace(s, codes=ndimage.convolve(s.codes.astype(float), leak)) for s in lit(SENSOR, rng)]
    of = _transfer(
        shots, [replace(s, codes=s.codes.astype(float)) for s in unlit(SENSOR, rng)], processing=("denoised",)
    )
    first, second = figures.electrons(of)["system_gain"]().flags

    assert first.startswith("noise of neighbours is correlated by 0.0")
    low = float(first.rsplit(" ", 2)[1])
    assert low == pytest.approx(100 * (1 - of.k / 0.4), abs=4)
    assert second == "the camera's frames are denoised: EMVA 1288 asks for the sensor's own"
