"""Amounts of a scenario file: a number with its unit, read into the unit that the records use."""

from typing import Annotated, Any

from pydantic import BaseModel, BeforeValidator, ConfigDict

from runner.spec.leaves import refuse, shown
from runner.spec.tree import number_in


class Shape(BaseModel):
    """A part of the file: unknown keys are refused."""

    model_config = ConfigDict(extra="forbid", frozen=True)


def amount_in(**factors: float) -> BeforeValidator:
    """Return the reader of an amount in one of some units, by their factors."""
    known = {_SPELLING.get(name, name): factor for name, factor in factors.items()}

    def read(node: Any) -> float:
        number, _, unit = str(node).strip().partition(" ")
        value = number_in(number)
        if not isinstance(node, str) or value is None or unit.strip() not in known:
            refuse(f"{shown(node)} is no amount that fits here", f"a number and one of: {', '.join(known)}")
        return value * known[unit.strip()]

    return BeforeValidator(read)


_SPELLING = {"percent": "%", "electrons": "e-", "dn_per_e": "DN/e-", "cycles": "cy/px", "line_pairs": "lp/mm"}
Microns = Annotated[float, amount_in(um=1.0, nm=1e-3, mm=1e3)]
Millimetres = Annotated[float, amount_in(mm=1.0)]
Degrees = Annotated[float, amount_in(deg=1.0)]
Pixels = Annotated[float, amount_in(px=1.0)]
Share = Annotated[float, amount_in(percent=1e-2)]
Electrons = Annotated[float, amount_in(electrons=1.0)]
Codes = Annotated[float, amount_in(DN=1.0)]
CyclesPerPixel = Annotated[float, amount_in(cycles=1.0)]
Hertz = Annotated[float, amount_in(Hz=1.0)]
LinePairs = Annotated[float, amount_in(line_pairs=1.0)]
