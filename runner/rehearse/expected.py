"""What a demo lot must end in: each unit's documented verdict, blame and characteristics, against its results."""

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from runner.errors import UsageError
from runner.spec.tree import Complaints, plain_data, read_tree

OPEN_QUESTIONS = ("does not conform", "cannot decide")
"""Verdicts of checks that the documentation of a unit must name."""


@dataclass(frozen=True)
class Documented:
    """What is documented about one unit, or what its results say in the same words."""

    verdict: str
    """The unit's verdict."""
    at_fault: str | None
    """Who is at fault, or None for nobody."""
    characteristics: tuple[str, ...]
    """Numbers of the characteristics that do not conform or cannot be decided, sorted."""

    def __str__(self) -> str:
        """One line in plain words."""
        fault = f", at fault: {self.at_fault}" if self.at_fault else ""
        numbers = f", characteristics {', '.join(self.characteristics)}" if self.characteristics else ""
        return f"{self.verdict}{fault}{numbers}"


@dataclass(frozen=True)
class Expected:
    """The file `expected.yaml` of a demo lot."""

    spec: str
    """File name of the test spec, beside it."""
    open_first: str
    """Serial of the unit whose report a newcomer opens first."""
    units: Mapping[str, Documented]
    """Units by serial."""


def read_expected(path: Path) -> Expected:
    """Read what is documented about a lot.

    Raises:
        UsageError: The file cannot be read or lacks a part.
    """
    complaints = Complaints()
    data = plain_data(read_tree(path, path.name, complaints)) or {}
    complaints.raise_errors()
    try:
        units = {serial: _documented(unit) for serial, unit in data["units"].items()}
        return Expected(str(data["spec"]), str(data["open_first"]), units)
    except (KeyError, TypeError, AttributeError) as error:
        raise UsageError(
            f"the file lacks a part: {error}",
            where=path.name,
            allowed="spec, open_first, and for every unit its verdict",
            next_step="install probatum again",
        ) from error


def _documented(unit: Mapping[str, Any]) -> Documented:
    fault = unit.get("at_fault")
    return Documented(str(unit["verdict"]), fault, tuple(sorted(str(n) for n in unit.get("characteristics", ()))))


def found_in(document: Mapping[str, Any]) -> Documented:
    """Return what the contents of a unit's `results.json` say."""
    numbers = {str(check["characteristic"]) for check in document["checks"] if check["verdict"] in OPEN_QUESTIONS}
    return Documented(document["verdict"], document["at_fault"], tuple(sorted(numbers)))
