"""Height, tilt, curvature and astigmatism of a known focal surface come back within their uncertainty."""

import numpy as np
import pytest
from numpy.typing import NDArray

from runner.measure.numerics.focal_surface import fit_surface

SIZE = (1600.0, 1200.0)
X, Y = (axis.ravel() for axis in np.meshgrid([160.0, 480, 800, 1120, 1440], [120.0, 600, 1080]))
KIND = np.where(np.arange(X.size) % 2 == 0, 0.5, -0.5)
TRUTH = {"height": 3.0, "tilt x": 12.0, "tilt y": -5.0, "curvature": -8.0, "astigmatism": 4.0}


def _surface(kind: NDArray[np.float64]) -> NDArray[np.float64]:
    reach = ((X - 800) ** 2 + (Y - 600) ** 2) / 1000**2
    tilt = TRUTH["tilt x"] * (X / 1600 - 0.5) + TRUTH["tilt y"] * (Y / 1200 - 0.5)
    return np.asarray(TRUTH["height"] + tilt + (TRUTH["curvature"] + TRUTH["astigmatism"] * kind) * reach)


def test_a_known_surface_comes_back() -> None:
    """Without noise every term is exact."""
    found = fit_surface(X, Y, SIZE, KIND, _surface(KIND), np.full(X.size, 0.1))

    assert found.terms == pytest.approx(TRUTH, abs=1e-9)
    assert found.residual == pytest.approx(0, abs=1e-9)


def test_the_terms_uncertainties_cover_noise() -> None:
    """Over 1000 draws 93 to 97.5 % of each term's errors lie within 2u."""
    rng = np.random.default_rng(5)
    inside = []
    for _ in range(1000):
        found = fit_surface(X, Y, SIZE, KIND, _surface(KIND) + 0.3 * rng.standard_normal(X.size), np.full(X.size, 0.3))
        inside.append([abs(found.terms[t] - TRUTH[t]) <= 2 * found.u(t) for t in TRUTH])

    assert np.all(np.mean(inside, axis=0) >= 0.93)
    assert np.all(np.mean(inside, axis=0) <= 0.985)  # Birge's ratio only ever widens


@pytest.mark.parametrize(
    ("chosen", "terms"),
    [
        ([7], ["height"]),
        ([0, 4, 10, 14], ["height", "tilt x", "tilt y"]),
        ([0, 4, 7, 10, 14], ["height", "tilt x", "tilt y", "curvature"]),
    ],
)
def test_what_the_regions_cannot_tell_is_left_out(chosen: list[int], terms: list[str]) -> None:
    """One region has a height; four corners have a plane; with the centre there is a curvature."""
    kind = np.zeros(len(chosen))
    found = fit_surface(X[chosen], Y[chosen], SIZE, kind, _surface(KIND)[chosen], np.full(len(chosen), 0.1))

    assert list(found.terms) == terms
