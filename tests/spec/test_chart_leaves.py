"""Single values of chart files."""

from typing import Any

import pytest
from pydantic_core import PydanticCustomError

from runner.spec import chart_leaves
from runner.spec.model import Amount
from runner.spec.tree import Complaints, parse


def _node(text: str) -> Any:
    tree = parse(f"value: {text}\n", "chart.yaml", Complaints())
    assert tree is not None
    return tree["value"]


def test_places_have_their_units() -> None:
    """Places are in mm or µm, below zero too; a plain 0 is 0 mm; other bare numbers are refused."""
    assert chart_leaves.read_place(_node("[-60 mm, 350 um]")) == (Amount(-60, "mm"), Amount(350, "µm"))
    assert chart_leaves.read_place(_node("[0, 3 mm]")) == (Amount(0, "mm"), Amount(3, "mm"))
    assert chart_leaves.in_mm(Amount(350, "µm")) == pytest.approx(0.35, rel=1e-12)
    with pytest.raises(PydanticCustomError, match="60 has no unit"):
        chart_leaves.read_place(_node("[60, 3 mm]"))
    with pytest.raises(PydanticCustomError, match="5 has unit px"):
        chart_leaves.read_place(_node("[3 mm, 5 px]"))


def test_data_become_plain() -> None:
    """Numbers become numbers, lengths stay text with their unit, lists stay lists."""
    found = chart_leaves.read_data(_node("{pitch: 8 mm, columns: 21, levels: [0.1, 0.5], on: 'yes'}"))

    assert found == {"pitch": "8 mm", "columns": 21, "levels": [0.1, 0.5], "on": "yes"}


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("[[1 lp/mm, 0.9]]", "two or more pairs"),
        ("[[1 lp/mm, 0.9], [1 lp/mm, 0.8]]", "do not rise"),
        ("[[1 lp/mm, 0.9], [2 lp/mm object, 0.8]]", "wrong units"),
        ("[[1 lp/mm, 0.9], [2 lp/mm, 1.2]]", "outside"),
    ],
)
def test_transfer_functions_are_on_the_chart(text: str, told: str) -> None:
    """A chart's own transfer function rises in lp/mm on the chart; no modulation exceeds one by more than a hair."""
    with pytest.raises(PydanticCustomError, match=told):
        chart_leaves.read_transfer(_node(text))
