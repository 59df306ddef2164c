"""Probability of conformity and guard bands against JCGM 106:2012, ISO 14253-1:2017 and ILAC-G8:09/2019."""

import pytest
from scipy.stats import norm

from runner.judge.decision_rule import Limits, acceptance_limits, probability
from runner.spec.model import GUARDED_ACCEPTANCE


@pytest.mark.parametrize(
    ("p", "z"), [(0.80, 0.84162), (0.90, 1.28155), (0.95, 1.64485), (0.99, 2.32635), (0.999, 3.09023)]
)
def test_one_sided_guard_bands(p: float, z: float) -> None:
    """JCGM 106:2012 7.3: the guard band of one limit is z(p) u."""
    low, high = acceptance_limits(Limits(10.0, None, GUARDED_ACCEPTANCE, p), 1.0)

    assert low == pytest.approx(10 + z, abs=1e-5)
    assert high is None


@pytest.mark.parametrize(
    ("limits", "y", "u", "p"),
    [
        ((None, -5.40), -5.47, 0.05, 0.91924),  # JCGM 106 diode example (printed 0.92)
        ((490.0, None), 507.0, 6.0, 0.99770),  # burst pressure
        ((12.5, 16.3), 13.6, 1.8, 0.66263),  # oil viscosity (printed 0.66)
    ],
)
def test_worked_examples(limits: tuple[float | None, float | None], y: float, u: float, p: float) -> None:
    """The examples of JCGM 106:2012 come out to the printed digits (example numbers from memory)."""
    assert probability(y, u, Limits(*limits, GUARDED_ACCEPTANCE, 0.95)) == pytest.approx(p, abs=1e-5)


@pytest.mark.parametrize(("half", "inner"), [(2.0, 0.20379), (3.0, 1.35508), (4.0, 2.35515), (6.0, 4.35515)])
def test_a_narrow_interval_needs_more_than_the_one_sided_factor(half: float, inner: float) -> None:
    """Acceptance half-widths of symmetric limits at 95 % (JCGM 106:2012 clause 7, computed)."""
    low, high = acceptance_limits(Limits(-half, half, GUARDED_ACCEPTANCE, 0.95), 1.0)

    assert high == pytest.approx(inner, abs=1e-5)
    assert low == pytest.approx(-inner, abs=1e-5)


def test_below_196_nothing_can_be_accepted() -> None:
    """For a half-width under 1.96 u no value reaches 95 %."""
    low, high = acceptance_limits(Limits(-1.959, 1.959, GUARDED_ACCEPTANCE, 0.95), 1.0)

    assert low is not None
    assert high is not None
    assert low > high


@pytest.mark.parametrize(
    ("r", "risk", "tolerance"),
    [(0.0, 0.5, 1e-12), (0.83, 0.0485, 5e-5), (1.0, 0.0228, 5e-5), (1.5, 0.00135, 5e-6), (3.0, 1e-9, 2e-11)],
)
def test_guard_bands_as_multiples_of_the_expanded_uncertainty(r: float, risk: float, tolerance: float) -> None:
    """ILAC-G8:09/2019 table 1: a value r U inside one limit has this specific risk (U = 2u, normal)."""
    inside = probability(2 * r, 1.0, Limits(0.0, None, GUARDED_ACCEPTANCE, 0.95))

    assert 1 - inside == pytest.approx(risk, abs=tolerance)


def test_iso_14253_band_is_0822_of_the_expanded_uncertainty() -> None:
    """ISO 14253-1:2017: at the default 95 % the guard band is 1.645 u, 0.822 U at k = 2."""
    low, _ = acceptance_limits(Limits(0.0, None, GUARDED_ACCEPTANCE, 0.95), 1.0)

    assert low == pytest.approx(norm.ppf(0.95), abs=1e-9)
    assert low is not None
    assert low / 2 == pytest.approx(0.8224, abs=1e-4)
