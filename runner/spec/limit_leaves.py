"""Leaves of limits: what a quantity is taken at, by names of the method's own."""

from typing import Annotated, Any

from runner.spec.leaves import leaf, read_amount, refuse, shown, write_amount
from runner.spec.model import Amount

PARAMETERS = ("frequency", "modulation")
"""What a quantity may be taken at by a key of its own; everything else stands under `parameters`."""


def read_at(node: Any) -> dict[str, Amount]:
    """Read `{level: 18 %}`."""
    if not isinstance(node, dict) or not node:
        refuse(f"{shown(node)} stands where names with values are meant", "for example {level: 18 %}")
    for name in node:
        if name in PARAMETERS:
            refuse(f"'{name}' is a key of its own", f"write {name}: beside quantity:", "", (name,))
    return {str(name): read_amount(value) for name, value in sorted(node.items())}


def _write_at(at: dict[str, Amount]) -> dict[str, Any]:
    return {name: write_amount(value) for name, value in at.items()}


At = Annotated[
    dict[str, Amount],
    *leaf(read_at, _write_at, {"type": "object", "additionalProperties": {"type": ["string", "number"]}}),
]
