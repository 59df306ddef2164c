"""Wedges against closed forms: frequency, modulation, number of lines, reversed contrast."""

import numpy as np
import pytest

from runner.measure.numerics.wedge_fit import WedgeFit, fit_wedge
from tests.scenes.wedges import WedgeScene


def _fit(scene: WedgeScene, seed: int = 1) -> WedgeFit:
    found = fit_wedge(scene.light(np.random.default_rng(seed)), scene.lines)
    assert found is not None
    return found


@pytest.mark.parametrize(
    "scene",
    [WedgeScene(sigma=0.5), WedgeScene(sigma=1.0, noise=0.01), WedgeScene(lines=9, ends=(0.12, 0.55), noise=0.005)],
    ids=["sharp", "blurred, noisy", "nine lines"],
)
def test_modulation_is_the_closed_form(scene: WedgeScene) -> None:
    """Over that at 0 within 0.012 from 0.15 to 0.45 cy/px, the reference's stated u of 2 % of it included."""
    found = _fit(scene)
    band = (found.f > 0.15) & (found.f < 0.45)
    true = np.array([scene.transfer(f) for f in found.f])
    allowed = 0.012 + 2 * found.reference_u / found.reference * true + 2 * found.u / found.reference

    assert np.all(np.abs(found.modulation / found.reference - true)[band] < allowed[band])
    assert found.reference == pytest.approx(4 / np.pi * 0.5 / 0.9, rel=0.06)


def test_the_frequency_is_known_where_nothing_is_seen() -> None:
    """Pieces from the coarse end to the fine one follow the scene's own frequency within 0.3 %, blurred to nothing."""
    scene = WedgeScene(sigma=1.2, noise=0.005)
    found = _fit(scene)
    first, last = found.f[0], found.f[-1]
    low, high = scene.ends

    assert low < first < low + 0.05
    assert high - 0.05 < last < high
    places = (found.f - low) / (high - low) * (scene.reach[1] - scene.reach[0])
    assert np.diff(places) == pytest.approx(np.full(59, np.diff(places).mean()), rel=0.15)
    assert scene.transfer(0.5) < 0.001


def test_lines_are_counted() -> None:
    """Five at the coarse end, all of them up to where modulation is 10 %, one patch where it is 1 %."""
    scene = WedgeScene(sigma=1.0, noise=0.003)
    found = _fit(scene)

    assert np.all(found.lines[found.f < scene.crossing(0.12)] == 5)
    assert np.median(found.lines[(found.f > scene.crossing(0.01)) & (found.f < 0.5)]) < 3
    assert np.all(_fit(WedgeScene(lines=9, ends=(0.12, 0.55))).lines[:20] == 9)


def test_reversed_contrast_is_negative() -> None:
    """Bright and dark exchanged from 0.3 cy/px on: positive before, negative beyond, no error of the frequency."""
    found = _fit(WedgeScene(sigma=0.8, reversed_from=0.3, noise=0.003))

    assert np.all(found.modulation[found.f < 0.29] > 0)
    assert np.all(found.modulation[(found.f > 0.31) & (found.f < 0.45)] < 0)
    assert found.frequency_u < 0.002


def test_what_is_no_wedge() -> None:
    """Noise, lines that do not converge, a wedge from its fine end, and a patch too small give nothing."""
    rng = np.random.default_rng(2)
    scene = WedgeScene()
    y = np.arange(110)[:, None] + np.zeros((1, 700))

    assert fit_wedge(rng.normal(0.5, 0.01, (110, 700)), 5) is None
    assert fit_wedge(scene.light()[:, ::-1], 5) is None
    assert fit_wedge(0.5 + 0.2 * np.cos(0.8 * y) + rng.normal(0, 0.01, y.shape), 5) is None
    assert fit_wedge(np.ones((20, 60)), 5) is None
