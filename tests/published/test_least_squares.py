"""Least squares against the certified sets of the NIST Statistical Reference Datasets (StRD), nist.gov/itl/strd.

Scored by LRE = -log10(|q - c| / |c|), the number of right digits, as StRD proposes. The straight line goes the way of
the edge's line fit (numpy polynomials), the curves the way of `scipy.optimize.least_squares`.
"""

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.optimize import least_squares

Array = NDArray[np.float64]
Model = Callable[[Array, Array], Array]

NORRIS = """
0.1 0.2; 338.8 337.4; 118.1 118.2; 888.0 884.6; 9.2 10.1; 228.1 226.5; 668.5 666.3; 998.5 996.3; 449.1 448.6;
778.9 777.0; 559.2 558.2; 0.3 0.4; 0.1 0.6; 778.1 775.5; 668.8 666.9; 339.3 338.0; 448.9 447.5; 10.8 11.6; 557.7 556.0;
228.3 228.1; 998.0 995.8; 888.8 887.6; 119.6 120.2; 0.3 0.3; 0.6 0.3; 557.6 556.8; 339.3 339.1; 888.0 887.2;
998.5 999.0; 778.9 779.0; 10.2 11.1; 117.6 118.3; 228.9 229.2; 668.4 669.1; 449.2 448.9; 0.2 0.5"""
"""y x of Norris (1960s, ozone monitors)."""
MISRA1A = """10.07 77.6; 14.73 114.9; 17.94 141.1; 23.93 190.8; 29.61 239.9; 35.18 289.0; 40.02 332.8; 44.82 378.4;
50.76 434.8; 55.05 477.3; 61.01 536.8; 66.40 593.1; 75.47 689.1; 81.78 760.0"""
"""y x of Misra1a (1978, dental research)."""
DANWOOD = "2.138 1.309; 3.421 1.471; 3.597 1.490; 4.340 1.565; 4.882 1.611; 5.660 1.680"
"""y x of DanWood (1980, radiated energy)."""
ECKERLE4 = """
.0001575 400; .0001699 405; .0002350 410; .0003102 415; .0004917 420; .0008710 425; .0017418 430; .0046400 435;
.0065895 436.5; .0097302 438; .0149002 439.5; .0237310 441; .0401683 442.5; .0712559 444; .1264458 445.5; .2073413 447;
.2902366 448.5; .3445623 450; .3698049 451.5; .3668534 453; .3106727 454.5; .2078154 456; .1164354 457.5; .0616764 459;
.0337200 460.5; .0194023 462; .0117831 463.5; .0074357 465; .0022732 470; .0008800 475; .0004579 480; .0002345 485;
.0001586 490; .0001143 495; .0000710 500"""
"""y x of Eckerle4 (1970s, circular interference transmittance): a Gaussian peak, the nearest to a line spread."""


def _columns(text: str) -> tuple[Array, Array]:
    rows = np.array([[float(v) for v in pair.split()] for pair in text.split(";")])
    return rows[:, 0], rows[:, 1]


def _digits(found: float, certified: float) -> float:
    return float(-np.log10(max(abs(found - certified) / abs(certified), 1e-16)))


def test_straight_line_of_norris() -> None:
    """Norris: intercept, slope and residual standard deviation to nine digits."""
    y, x = _columns(NORRIS)
    b = np.polynomial.polynomial.polyfit(x, y, 1)
    rest = y - b[0] - b[1] * x
    sd = np.sqrt(rest @ rest / (x.size - 2))
    assert _digits(b[0], -0.262323073774029) >= 9
    assert _digits(b[1], 1.00211681802045) >= 9
    assert _digits(sd, 0.884796396144373) >= 9


def _fit(model: Model, x: Array, y: Array, start: tuple[float, ...], scale: tuple[float, ...]) -> Any:
    def residual(b: Array) -> Array:
        return model(b, x) - y

    # complex-step derivatives are exact to rounding; finite differences would cost a digit of Misra1a
    return least_squares(residual, start, method="lm", x_scale=scale, jac="cs", xtol=1e-15, ftol=1e-15, gtol=1e-15)


def _exponential(b: Array, x: Array) -> Array:
    return np.asarray(b[0] * (1 - np.exp(-b[1] * x)))


def _power(b: Array, x: Array) -> Array:
    return np.asarray(b[0] * x ** b[1])


def _gaussian(b: Array, x: Array) -> Array:
    return np.asarray(b[0] / b[1] * np.exp(-(((x - b[2]) / b[1]) ** 2) / 2))


@pytest.mark.parametrize(
    ("model", "text", "starts", "values", "errors", "rss"),
    [
        (
            _exponential, MISRA1A, [(500, 0.0001), (250, 0.0005)],
            (2.3894212918e02, 5.5015643181e-04), (2.7070075241e00, 7.2668688436e-06), 1.2455138894e-01,
        ),
        (
            _power, DANWOOD, [(1, 5), (0.7, 4)],
            (7.6886226176e-01, 3.8604055871e00), (1.8281973860e-02, 5.1726610913e-02), 4.3173084083e-03,
        ),
        (
            _gaussian, ECKERLE4, [(1, 10, 500), (1.5, 5, 450)],
            (1.5543827178, 4.0888321754, 451.54121844), (1.5408051163e-02, 4.6803020753e-02, 4.6800518816e-02),
            1.4635887487e-03,
        ),
    ],
    ids=["Misra1a", "DanWood", "Eckerle4"],
)  # fmt: skip
def test_curves(
    model: Model,
    text: str,
    starts: list[tuple[float, ...]],
    values: tuple[float, ...],
    errors: tuple[float, ...],
    rss: float,
) -> None:
    """Parameters from both starts, residual sum of squares and standard deviations to seven digits."""
    y, x = _columns(text)
    fits = [_fit(model, x, y, start, values) for start in starts]
    fit = fits[-1]
    for one in fits:
        assert all(_digits(f, c) >= 7 for f, c in zip(one.x, values, strict=True))
    assert _digits(2 * fit.cost, rss) >= 7
    jacobian = np.asarray(fit.jac)
    sd = np.sqrt(np.diag(np.linalg.inv(jacobian.T @ jacobian)) * 2 * fit.cost / (x.size - len(values)))
    assert all(_digits(f, c) >= 7 for f, c in zip(sd, errors, strict=True))


def test_width_of_the_gaussian_peak() -> None:
    """Eckerle4's peak is 2.35482 × 4.0888321754 = 9.62846 wide at half its height (Gaussian FWHM)."""
    y, x = _columns(ECKERLE4)
    fit = _fit(_gaussian, x, y, (1.5, 5, 450), (1, 1, 100))
    assert 2 * np.sqrt(2 * np.log(2)) * fit.x[1] == pytest.approx(9.62846, abs=1e-4)
