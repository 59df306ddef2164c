"""Arrangements of marks that look like themselves or like others."""

from cmath import exp, pi

import pytest

from runner.spec.chart_arrangement import likeness, taken_for

IRREGULAR = [(-92, -56), (49, -66), (91, -28), (92, 43), (57, 65), (-52, 64), (-90, 54), (-91, 0), (10, 20)]


def _ring(count: int, radius: float = 80.0) -> list[tuple[float, float]]:
    return [(z.real, z.imag) for z in (radius * exp(2j * pi * k / count) for k in range(count))]


@pytest.mark.parametrize(
    "marks",
    [
        _ring(8),
        [(x, y) for x in (-90.0, -30.0, 30.0, 90.0) for y in (-60.0, 0.0, 60.0)],
        [(-90, -60), (-40, -20), (-70, 50), (90, -60), (40, -20), (70, 50), (0, 70), (0, -70)],
        [(-90, -60), (-40, -20), (-70, 50), (90, 60), (40, 20), (70, -50), (20, 65), (-20, -65)],
    ],
    ids=["ring", "lattice", "mirror line", "half turn"],
)
def test_symmetry_is_seen(marks: list[tuple[float, float]]) -> None:
    """Rings, lattices, figures with a mirror line or a centre of symmetry are told."""
    assert likeness(marks, 8.0)


def test_nearly_symmetric_is_symmetric() -> None:
    """Less than a diameter from symmetry is no difference that a tilted view keeps."""
    assert likeness([(x + 2.0 * (n % 3), y) for n, (x, y) in enumerate(_ring(8))], 8.0)


def test_an_irregular_arrangement_passes() -> None:
    """An arrangement without symmetry is let pass."""
    assert not likeness(IRREGULAR, 8.0)


@pytest.mark.parametrize("turn", [1.0, exp(1j), exp(3j)])
def test_the_same_arrangement_elsewhere_is_told(turn: complex) -> None:
    """Two charts whose marks differ only by turn, size and shift are taken for each other."""
    moved = [(z.real, z.imag) for z in (1.1 * turn * complex(*p) + 4 for p in IRREGULAR)]

    assert taken_for(IRREGULAR, moved, 8.0)
    assert taken_for([(-x, y) for x, y in IRREGULAR], moved, 8.0).endswith("mirrored")
    assert not taken_for(IRREGULAR, _ring(9), 8.0)
