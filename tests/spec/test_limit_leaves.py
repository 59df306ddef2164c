"""What a limit is taken at is read with its units, and written back so that it reads the same."""

import pytest
from pydantic import TypeAdapter, ValidationError

from runner.spec.limit_leaves import At
from runner.spec.model import Amount

LEAF: TypeAdapter[dict[str, Amount]] = TypeAdapter(At)


def test_values_keep_their_units_and_read_back() -> None:
    """Names come sorted, a plain number stays one, and what is written reads as the same again."""
    read = LEAF.validate_python({"level": "18 %", "contrast": 0.5})

    assert list(read) == ["contrast", "level"]
    assert read == {"contrast": Amount(0.5, "1"), "level": Amount(18.0, "%")}
    assert LEAF.validate_python(LEAF.dump_python(read)) == read


@pytest.mark.parametrize(
    ("node", "words"),
    [
        ("18 %", "stands where names with values are meant"),
        ({}, "stands where names with values are meant"),
        ({"frequency": "0.1 cy/px"}, "'frequency' is a key of its own"),
        ({"level": "18 percent"}, "unknown unit"),
    ],
)
def test_what_is_no_parameter_is_refused(node: object, words: str) -> None:
    """An empty or plain value, a key that has its own place and an unknown unit are complained about."""
    with pytest.raises(ValidationError, match=words):
        LEAF.validate_python(node)
