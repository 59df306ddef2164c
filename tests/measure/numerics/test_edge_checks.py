"""What a fit must show before it is believed: every refusal with its cause, none on a good scene."""

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from runner.errors import MeasurementRefused
from runner.measure.numerics.edge_checks import band, check, straightness, strange_share, unevenness
from runner.measure.numerics.edge_curves import Curves
from runner.measure.numerics.edge_fit import fit_edge
from runner.measure.numerics.line_spread import Array
from tests.scenes.edges import EdgeScene, bar_scene, corner_scene
from tests.scenes.line_spreads import Exponential, Gaussian, Pupil

GOOD = EdgeScene(Gaussian(0.6), (80, 120), 5.0, read_noise=320)


def noisy(scene: EdgeScene, signal: Array | None = None, seed: int = 1) -> Array:
    """Return the scene's (or another) light with the scene's read noise, fraction of range."""
    light = scene.signal() if signal is None else signal
    return np.asarray((light + scene.read_noise * np.random.default_rng(seed).standard_normal(light.shape)) / 65535)


def curves_of(region: Array, sites: NDArray[np.bool_] | None = None) -> Curves:
    """Return the curves of a straight fit."""
    return Curves(fit_edge(region, sites=sites))


@pytest.mark.parametrize("optics", [Gaussian(0.35), Pupil(0.5), Pupil(0.7, coma=0.8), Exponential(0.8)])
def test_good_scenes_pass(optics: Gaussian | Pupil | Exponential) -> None:
    """Straight, even and lonely edges of any blur pass, with the full band and no certain departure from straight."""
    for direction in (2.5, 17.0, 43.0):
        curves = curves_of(noisy(replace(GOOD, optics=optics, direction=direction), seed=int(direction)))
        most, straight = check(curves, shading_known=False)
        assert most > 0.65
        assert not straight.certain
        assert strange_share(curves) == 0
        assert not unevenness(curves)[1]


@pytest.mark.parametrize(
    ("cause", "sentence", "region"),
    [
        ("edge too near an axis", r"the edge lies 1\.\d+° from a pixel axis", noisy(replace(GOOD, direction=1.2))),
        ("too few crossings", r"passes 0\.8\d px", noisy(replace(GOOD, direction=2.4, size=(80, 20)))),
        ("too noisy", r"the step is \d\.\d times the noise of a pixel", noisy(replace(GOOD, read_noise=12000))),
        ("uneven", r"may cost \d\.\d % of MTF50", noisy(replace(GOOD, shading=(0.05, 0.0, 0.0)))),
        ("uneven", r"levels beside the edge vary", noisy(replace(GOOD, shading=(0.0, 0.15, 0.0)))),
        ("uneven", r"levels beside the edge vary", noisy(replace(GOOD, shading=(0.0, 0.0, 0.3)))),
        ("two edges", r"% of the region lies more than 15 %", noisy(GOOD, bar_scene(replace(GOOD, offset=-8), 36))),
        (
            "outside the estimator's limits",
            r"px wide \(10-90 %\) and the region shows only",
            noisy(replace(GOOD, optics=Gaussian(6), size=(30, 120))),
        ),
    ],
    ids=["axis", "short", "noise", "across", "along", "vignetting", "bar", "wide"],
)
def test_each_refusal(cause: str, sentence: str, region: Array) -> None:
    """Each fault of a scene is refused under its own cause, with figures and what is allowed."""
    with pytest.raises(MeasurementRefused, match=sentence) as refused:
        check(curves_of(region), shading_known=False)
    assert refused.value.cause == cause
    assert refused.value.allowed
    assert refused.value.next_step


@pytest.mark.parametrize("offset", [-48, -40, -20, 0, 30])
def test_no_corner_is_measured(offset: float) -> None:
    """Two edges that meet, in whatever part of the region, never pass as one (the cause may differ)."""
    region = noisy(GOOD, corner_scene(GOOD, replace(GOOD, direction=95, offset=offset)))
    with pytest.raises(MeasurementRefused, match=r"(make the region (smaller|shorter|wider)|give more light)"):
        check(curves_of(region), shading_known=False)


def test_sampling_of_a_mosaic_sets_the_band() -> None:
    """Every second pixel of every second row at atan 1/2 lies 2/√5 px apart along the normal: refused, allowed alone.

    Samples of a square grid of pitch p at atan 1/2 repeat on p/√5 along the normal (geometry): 0.447 px for all
    pixels, hence a band of 1; 0.894 px for one colour of a mosaic.
    """
    region = noisy(replace(GOOD, direction=float(np.degrees(np.arctan(0.5))), size=(120, 120), optics=Gaussian(1.0)))
    sites = np.zeros(region.shape, dtype=bool)
    sites[::2, ::2] = True
    assert band(fit_edge(region)) == 1.0
    with pytest.raises(MeasurementRefused, match=r"lie up to 0\.8\d px apart") as refused:
        band(fit_edge(region, sites=sites))
    assert refused.value.cause == "undersampled"


@pytest.mark.parametrize("sagitta", [0.6, 1.2])
def test_straightness_of_a_parabola(sagitta: float) -> None:
    """A sagitta c under a straight fit departs by 4 c²/45 in the mean square; a straight edge by nothing certain.

    ∫ (t² - 1/3)² dt / 2 over -1..1 is 4/45; fifteen segments and two fitted numbers of the line blur it by 20 %.
    """
    bent = straightness(fit_edge(noisy(replace(GOOD, curve=(sagitta,), optics=Gaussian(1.0)))))
    assert bent.variance == pytest.approx(4 * sagitta**2 / 45, rel=0.2)
    assert bent.certain
    plain = straightness(fit_edge(noisy(GOOD)))
    assert plain.variance < 0.001
    assert not plain.certain


def test_shading_that_is_known_is_not_refused() -> None:
    """The shading of a fit that bears it is no reason to refuse; without, the same region is uneven."""
    region = noisy(replace(GOOD, shading=(0.0, 0.15, 0.0)))
    most, _ = check(Curves(fit_edge(region, shading="fitted")), shading_known=True)
    assert most == 1.0
    with pytest.raises(MeasurementRefused, match=r"set 'shading: \{from: ROLE\}' with a flat frame, or"):
        check(curves_of(region), shading_known=False)
