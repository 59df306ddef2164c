"""Readings say in words what they are of, and every reason for a missing value is a word that the judge knows."""

import ast
from dataclasses import FrozenInstanceError
from pathlib import Path

import pytest

from runner.measure.reading import CAUSES, Component, Curve, Reading, Refusal, label
from runner.spec.model import Amount

RUNNER = Path(__file__).resolve().parents[2] / "runner"
CAUSE_AT = {"MeasurementRefused": 0, "Refusal": 0, "NotFound": 2}
"""Where the cause stands among the arguments of those who say why there is no value."""


def _causes_said() -> set[str]:
    """Return every cause that is written down as a literal anywhere in the measuring layer."""
    said = set()
    for module in sorted((RUNNER / "measure").rglob("*.py")):
        for node in ast.walk(ast.parse(module.read_text(encoding="utf-8"))):
            name = node.func.id if isinstance(node, ast.Call) and isinstance(node.func, ast.Name) else ""
            if isinstance(node, ast.Call) and name in CAUSE_AT and len(node.args) > CAUSE_AT[name]:
                cause = node.args[CAUSE_AT[name]]
                parts = [cause.body, cause.orelse] if isinstance(cause, ast.IfExp) else [cause]
                said |= {str(part.value) for part in parts if isinstance(part, ast.Constant)}
    return said


def test_no_cause_is_invented() -> None:
    """Whatever target or method refuses, its cause is in the list that the judge turns into blame."""
    said = _causes_said()

    assert len(said) >= 10
    assert said <= set(CAUSES)


def test_every_cause_has_a_plain_sentence() -> None:
    """A cause is told to people as one clause without a full stop, and no two are told alike."""
    for cause, sentence in CAUSES.items():
        assert cause == cause.lower().strip()
        assert len(sentence.split()) >= 3
        assert not sentence.endswith(".")
    assert len(set(CAUSES.values())) == len(CAUSES)


@pytest.mark.parametrize(
    ("quantity", "parameters", "part", "words"),
    [
        ("mtf", {"frequency": Amount(0.25, "cy/px")}, "system", "mtf at 0.25 cy/px"),
        ("mtf", {"frequency": Amount(100.0, "lp/mm")}, "lens", "mtf at 100 lp/mm, lens alone"),
        ("mtf50", {}, "system", "mtf50"),
        ("edge_width", {}, "system", "edge width"),
        ("frequency", {"modulation": Amount(0.3, "1")}, "system", "frequency at 0.3"),
        ("x", {"a": Amount(1.0, "px"), "b": Amount(2.5, "%")}, "system", "x at 1 px at 2.5 %"),
    ],
)
def test_a_label_says_quantity_place_and_part(
    quantity: str, parameters: dict[str, Amount], part: str, words: str
) -> None:
    """Underlines become spaces, units stand behind their figures, a pure number has none, the lens alone is said."""
    assert label(quantity, parameters, part) == words
    assert Reading("centre", quantity, "1", 0.5, 0.1, parameters=parameters, part=part).label == words


def test_records_are_closed_and_equal_by_what_they_hold() -> None:
    """Nobody changes a reading after it was measured; two readings of the same content are the same."""
    one = Reading("centre", "mtf50", "cy/px", 0.3, 0.01, (Component("noise", 0.01, "A", 40),), bound=None)
    refused = Reading("centre", "mtf50", "cy/px", None, None, refusal=Refusal("no edge", "nothing there"))

    assert one == Reading("centre", "mtf50", "cy/px", 0.3, 0.01, (Component("noise", 0.01, "A", 40),))
    assert (refused.value, refused.u, refused.bound, refused.attempt, refused.channel) == (None, None, None, 1, "mono")
    for record, field in ((one, "value"), (refused, "refusal"), (Curve("c", "mtf", (), (), (), "px", "1"), "y")):
        with pytest.raises(FrozenInstanceError, match=f"cannot assign to field '{field}'"):
            setattr(record, field, None)
