"""Worked examples of JCGM 100:2008 (GUM) and JCGM 101:2008 through the product's own arithmetic."""

from math import sqrt

import numpy as np
import pytest
from scipy.stats import t

from runner.measure.reading import Component
from runner.measure.uncertainty import Input, combined_u, coverage_factor, effective_dof, propagate


def test_gum_h1_end_gauge() -> None:
    """GUM H.1: u_c = 32 nm, 16 effective degrees of freedom, t99 = 2.92, U99 = 93 nm."""
    budget = {"standard": (25.0, 18), "comparator": (5.8, 24), "random": (3.9, 5), "systematic": (6.7, 8)}
    budget |= {"expansion": (2.887, 50), "temperature": (16.599, 2)}
    parts = [Component(name, u, "B", dof) for name, (u, dof) in budget.items()]
    u = combined_u([1.0] * len(parts), [c.u for c in parts])
    dof = effective_dof(parts)

    assert u == pytest.approx(31.66, abs=0.01)
    assert dof == pytest.approx(16.75, abs=0.1)  # printed 16 after truncation; inputs are rounded to 3 digits
    assert coverage_factor(0.99, dof) == pytest.approx(2.9208, abs=1e-4)
    assert coverage_factor(0.99, dof) * u == pytest.approx(93, abs=0.6)


def test_gum_h2_correlated_inputs() -> None:
    """GUM H.2: resistance, reactance and impedance from correlated readings (raw data from memory)."""
    volts = np.array([5.007, 4.994, 5.005, 4.990, 4.999])
    amps = np.array([19.663, 19.639, 19.640, 19.685, 19.678]) / 1000
    phase = np.array([1.0456, 1.0438, 1.0468, 1.0428, 1.0433])
    rows = np.array([volts, amps, phase])
    v, i, phi = rows.mean(axis=1)
    us = rows.std(axis=1, ddof=1) / sqrt(5)
    r = np.corrcoef(rows)

    assert r[0, 1] == pytest.approx(-0.3553, abs=5e-4)
    assert r[0, 2] == pytest.approx(0.8576, abs=5e-4)
    resistance = [np.cos(phi) / i, -v * np.cos(phi) / i**2, -v * np.sin(phi) / i]
    reactance = [np.sin(phi) / i, -v * np.sin(phi) / i**2, v * np.cos(phi) / i]
    impedance = [1 / i, -v / i**2, 0.0]
    assert combined_u(resistance, us, r.tolist()) == pytest.approx(0.071, abs=5e-4)
    assert combined_u(reactance, us, r.tolist()) == pytest.approx(0.296, abs=5e-4)
    assert combined_u(impedance, us, r.tolist()) == pytest.approx(0.236, abs=5e-4)


def test_gum_table_g2() -> None:
    """GUM table G.2: t for 95.45 % and 99 % at 5 and 20 degrees of freedom (printed 2.65, 4.03, 2.13, 2.85)."""
    for dof, p, k in ((5, 0.9545, 2.65), (5, 0.99, 4.03), (20, 0.9545, 2.13), (20, 0.99, 2.85)):
        assert coverage_factor(p, dof) == pytest.approx(k, abs=0.005)
        assert coverage_factor(p, dof) == pytest.approx(t.ppf((1 + p) / 2, dof))


def test_jcgm_101_four_rectangular_inputs() -> None:
    """JCGM 101:2008 9.2.3: the sum of four rectangular inputs has u = 2.0 and the 95 % interval ±3.88."""
    out = propagate(lambda x: x.sum(axis=0), [Input(0.0, 1.0, shape="rectangular")] * 4)
    low, high = out.interval(0.95)

    assert out.u == pytest.approx(2.0, abs=0.02)
    assert (high - low) / 2 == pytest.approx(3.8794, abs=0.03)


@pytest.mark.parametrize(
    ("x1", "mean", "sd", "shortest"),
    [(0.0, 50, 50, (0, 149.8)), (0.010, 150, 111.8, (2.0, 366.0)), (0.050, 2550, 502.5, (1594, 3549))],
)
def test_jcgm_101_comparison_loss(x1: float, mean: float, sd: float, shortest: tuple[float, float]) -> None:
    """JCGM 101:2008 9.4: a sum of squares near its floor, where the first order fails (values × 1e-6)."""
    out = propagate(lambda x: (x[0] ** 2 + x[1] ** 2) * 1e6, [Input(x1, 0.005), Input(0.0, 0.005)])

    assert out.mean == pytest.approx(mean, rel=0.015)
    assert out.u == pytest.approx(sd, rel=0.015)
    low, high = out.shortest(0.95)
    assert high == pytest.approx(shortest[1], rel=0.03)
    assert low == pytest.approx(shortest[0], abs=25)
