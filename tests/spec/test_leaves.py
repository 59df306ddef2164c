"""The single values of a spec: each reads what it should, writes itself back, and refuses the rest in one sentence."""

from typing import Annotated, Any

import pytest
from pydantic import BaseModel, TypeAdapter, ValidationError

from runner.spec import leaves
from runner.spec.leaves import Inequality, choice
from runner.spec.model import Amount
from runner.spec.tree import Complaints, parse


def _node(text: str) -> Any:
    complaints = Complaints()
    tree = parse(f"a: {text}\n", "f", complaints)
    complaints.raise_errors()
    assert tree is not None
    return tree["a"]


def _refusal(kind: Any, text: str) -> str:
    with pytest.raises(ValidationError, match="validation error") as caught:
        TypeAdapter(kind).validate_python(_node(text))
    return str(caught.value.errors()[0]["ctx"]["found"])


@pytest.mark.parametrize(
    ("kind", "text", "value", "written"),
    [
        (leaves.TextLeaf, "0012", "0012", "0012"),
        (leaves.TextLeaf, "'1.10'", "1.10", "1.10"),
        (leaves.Texts, "mtf", ("mtf",), ["mtf"]),
        (leaves.Texts, "[mtf, mtf50]", ("mtf", "mtf50"), ["mtf", "mtf50"]),
        (leaves.Truth, "true", True, True),
        (leaves.Positive, "2.8", 2.8, 2.8),
        (leaves.Count, "4", 4, 4),
        (leaves.AnyAmount, "0.45", Amount(0.45, "1"), 0.45),
        (leaves.AnyAmount, "0.20 cy/px", Amount(0.2, "cy/px"), "0.2 cy/px"),
        (leaves.Length, "3.0 um", Amount(3.0, "µm"), "3 µm"),
        (leaves.Tolerance, "0.02", (Amount(0.02, "1"), Amount(0.02, "1")), 0.02),
        (leaves.Tolerance, "[1 px, 2 px]", (Amount(1.0, "px"), Amount(2.0, "px")), ["1 px", "2 px"]),
        (leaves.InequalityLeaf, "at  least 20 %", Inequality(Amount(20.0, "%"), None), "at least 20 %"),
        (
            leaves.InequalityLeaf,
            "from 20 to 80 %",
            Inequality(Amount(20.0, "%"), Amount(80.0, "%")),
            "from 20 % to 80 %",
        ),
        (Annotated[str, *choice("worst", "mean")], "mean", "mean", "mean"),
    ],
)
def test_a_leaf_reads_and_writes_back(kind: Any, text: str, value: object, written: object) -> None:
    """A value is read with its unit, and what is written for the expanded form reads back to the same value."""
    adapter: TypeAdapter[Any] = TypeAdapter(kind)

    assert adapter.validate_python(_node(text)) == value
    assert adapter.dump_python(value, mode="json") == written


@pytest.mark.parametrize(
    ("kind", "text", "told"),
    [
        (leaves.TextLeaf, "{}", "a mapping stands where a text is meant"),
        (leaves.TextLeaf, "''", "the text is empty"),
        (leaves.TextLeaf, "'" + "x" * 501 + "'", "the text is longer than 500 characters"),
        (leaves.TextLeaf, '"a\\u0007"', "or holds control characters"),
        (leaves.Texts, "[]", "the list is empty"),
        (leaves.Texts, "[a, a]", "'a' stands in the list twice"),
        (leaves.Truth, "on", "'on' is neither true nor false"),
        (leaves.Truth, "'true'", "'true' is neither true nor false"),
        (leaves.Positive, "0", "0 lies outside what is allowed"),
        (leaves.Positive, "'2.8'", "'2.8' is no number"),
        (leaves.Count, "12:30", "'12:30' is no whole number"),
        (leaves.Share, "0 %", "'0 %' lies outside what is allowed"),
        (leaves.Level, "64 px", "unit px does not fit here"),
        (leaves.AnyAmount, "[1 px]", "a list is no number with a unit"),
        (leaves.Tolerance, "[1 px, 2 px, 3 px]", "a tolerance is one amount or [minus, plus]"),
        (leaves.InequalityLeaf, "from 1 px to 2 %", "'from 1 px to 2 %' has two units"),
        (leaves.InequalityLeaf, "3 %", "'3 %' is no inequality"),
        (Annotated[str, *choice("worst", "mean")], "[worst]", "a list is not allowed here"),
    ],
)
def test_a_leaf_refuses(kind: Any, text: str, told: str) -> None:
    """What does not fit is refused with what was found."""
    assert told in _refusal(kind, text)


def test_a_choice_names_the_nearest_word() -> None:
    """A misspelt word is answered with the words that are allowed and the nearest of them."""

    class One(BaseModel):
        rule: Annotated[str, *choice("worst", "mean")]

    with pytest.raises(ValidationError, match="not allowed here") as caught:
        One.model_validate({"rule": _node("wurst")})
    assert caught.value.errors()[0]["ctx"] == {
        "found": "'wurst' is not allowed here",
        "allowed": "one of: worst, mean",
        "step": "did you mean 'worst'?",
        "inside": (),
    }


def test_shares_are_exact() -> None:
    """95 % is the double 0.95, not its neighbour."""
    assert leaves.share(Amount(95.0, "%")) == 0.95
