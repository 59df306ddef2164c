"""A flat frame's shading: what it finds, what its noise costs, which flats are refused."""

from dataclasses import replace

import numpy as np
import pytest

from runner.errors import MeasurementRefused
from runner.measure.numerics.edge_curves import Curves
from runner.measure.numerics.edge_fit import fit_edge
from runner.measure.numerics.edge_readouts import crossing
from runner.measure.numerics.edge_shading import smooth_flat
from runner.measure.numerics.line_spread import Array
from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Gaussian

SCENE = EdgeScene(Gaussian(0.6), (60, 80), 5.0, shading=(0.1, -0.06, -0.05))


def flat(rng: np.random.Generator | None = None, noise: float = 0.0) -> Array:
    """Return the scene's flat as a fraction of range, with noise of that fraction."""
    light = SCENE.flat() / 65535
    return np.asarray(light if rng is None else light + noise * rng.standard_normal(light.shape))


def half(region: Array) -> tuple[float, float]:
    """Return MTF50 and its u."""
    curves = Curves(fit_edge(region))
    found = crossing(curves, 0.5, 1.0)
    assert found is not None
    return found.value, found.u(curves.fit.covariance)


def test_a_smooth_field_is_found_exactly() -> None:
    """A noiseless cubic field comes back with mean 1 to rounding, whatever its level; the input stays as it was."""
    field = SCENE.field()
    x = np.linspace(-1, 1, 60)
    cubic = field + 0.02 * x**3
    for level in (0.05, 0.6):
        crop = level * cubic
        kept = crop.copy()
        found = smooth_flat([crop])
        assert found.field == pytest.approx(cubic / cubic.mean(), rel=1e-9)
        assert found.field.mean() == pytest.approx(1, rel=1e-12)
        assert np.array_equal(crop, kept)


def test_a_known_flat_leaves_the_edge_as_it_was() -> None:
    """Divided by its flat, the shaded edge has the MTF50 of the unshaded one within its u; undivided it has not."""
    noise = 160 / 65535 * np.random.default_rng(3).standard_normal((80, 60))
    plain, u = half(replace(SCENE, shading=(0.0, 0.0, 0.0)).signal() / 65535 + noise)
    shaded = SCENE.signal() / 65535 + noise
    assert abs(half(shaded / smooth_flat([flat()]).field)[0] - plain) < u
    assert abs(half(shaded)[0] - plain) > 3 * u


def test_coefficients_scatter_as_stated() -> None:
    """Over 200 noisy flats every term scatters as stated (known to 5 %: five times that), four repeats halve it."""
    rng = np.random.default_rng(4)
    truth = SCENE.field() / SCENE.field().mean()
    terms = smooth_flat([flat()]).terms
    design = np.vstack([np.ones((1, *truth.shape)), terms]).reshape(len(terms) + 1, -1).T
    inverse = np.linalg.pinv(design)
    drawn, stated = [], []
    for _ in range(200):
        one = smooth_flat([flat(rng, 0.02)])
        drawn.append((inverse @ (one.field - truth).ravel())[1:])
        stated.append(np.diag(one.covariance))
    deviations = np.sqrt(np.mean(stated, axis=0))
    assert np.std(drawn, axis=0) == pytest.approx(deviations, rel=0.25)
    four = smooth_flat([flat(rng, 0.02) for _ in range(4)])
    assert np.sqrt(np.diag(four.covariance)) == pytest.approx(deviations / 2, rel=0.05)


def test_noise_of_the_flat_reaches_the_value() -> None:
    """Noisy flats make MTF50 of one and the same frame scatter by the u that the flat's covariance states for it.

    24 flats know a deviation to 15 %: within a factor 1.5.
    """
    rng = np.random.default_rng(5)
    region = SCENE.signal() / 65535 + 160 / 65535 * rng.standard_normal((80, 60))
    values, stated = [], []
    for _ in range(24):
        one = smooth_flat([flat(rng, 0.1)])
        curves = Curves(fit_edge(region / one.field))
        found = crossing(curves, 0.5, 1.0)
        assert found is not None
        values.append(found.value)
        stated.append(found.u(one.covariance_of(curves.fit, region / one.field)))
    assert 1 / 1.5 < np.std(values) / np.mean(stated) < 1.5


def test_flats_that_are_none_are_refused() -> None:
    """A dark flat, and one with structure of more than 1 % in squares of 8 px, are refused; one of 0.5 % is not."""
    with pytest.raises(MeasurementRefused, match=r"flat's mean is 1\.9 % of the range; at least 2 %") as refused:
        smooth_flat([np.full((80, 60), 0.019)])
    assert refused.value.cause == "missing companion"
    smooth_flat([np.full((80, 60), 0.021)])
    squares = np.where((np.indices((80, 60)) // 8).sum(axis=0) % 2, 1.0, -1.0)
    with pytest.raises(MeasurementRefused, match=r"by 1\.5 % rms in squares of 8 px; at most 1 %") as refused:
        smooth_flat([0.5 * (1 + 0.015 * squares)])
    assert refused.value.cause == "missing companion"
    smooth_flat([0.5 * (1 + 0.005 * squares)])
    with pytest.raises(MeasurementRefused, match=r"departs from a smooth shading by \d+\.\d % rms"):
        smooth_flat([SCENE.signal() / 65535])


def test_sites_outside_a_channel_do_not_count() -> None:
    """What lies in other colours' pixels changes nothing in a mosaic channel's flat."""
    rng = np.random.default_rng(6)
    crop = flat(rng, 0.01)
    sites = np.zeros(crop.shape, dtype=bool)
    sites[1::2, ::2] = True
    one, two = smooth_flat([crop], sites), smooth_flat([np.where(sites, crop, 0.99)], sites)
    assert np.array_equal(one.field, two.field)
    assert np.array_equal(one.covariance, two.covariance)
    noise = 0.01 * np.sqrt(10 / sites.sum()) / crop.mean()  # rms over the region of ten fitted terms
    assert one.field == pytest.approx(SCENE.field() / SCENE.field().mean(), abs=8 * noise)


def test_a_flat_that_falls_to_nothing_is_refused() -> None:
    """A mean of 15 % says nothing of a side that is dark: there would be no light to divide by."""
    flat = np.tile(np.linspace(0.0, 0.3, 60), (40, 1))

    with pytest.raises(MeasurementRefused, match=r"the flat falls to .* within the region"):
        smooth_flat([flat])
