"""The words of a verdict and the record of a check: a contract, never renamed."""

from collections.abc import Mapping
from dataclasses import dataclass, field

from runner.spec.model import Amount

CONFORMS = "conforms"
DOES_NOT_CONFORM = "does not conform"
CANNOT_DECIDE = "cannot decide"
NOT_MEASURED = "not measured"
REPORT_ONLY = "report only"
"""Stands in a check that has no limit; it never enters the roll-up."""
VERDICTS = (CONFORMS, DOES_NOT_CONFORM, CANNOT_DECIDE, NOT_MEASURED)

AT_FAULT_UNIT = "unit"
AT_FAULT_CAPTURE = "capture"
AT_FAULT_CANNOT_TELL = "cannot tell"
AT_FAULT_PROGRAM = "program"


@dataclass(frozen=True)
class Check:
    """One limit applied to one region (or to a combination of regions)."""

    characteristic: str
    """Number in the spec."""
    capture: str
    """Capture."""
    where: str
    """Region's name, or the words of the combination, e.g. `range of corners`."""
    channel: str
    """Colour channel."""
    quantity: str
    """Quantity name."""
    label: str
    """Quantity in words."""
    measured_in: str
    """Unit of value, u and limits."""
    verdict: str
    """One of `VERDICTS` or `REPORT_ONLY`."""
    reason: str
    """One plain sentence."""
    value: float | None = None
    """Value in the limit's unit."""
    u: float | None = None
    """Standard uncertainty in the limit's unit."""
    k: float = 2.0
    """Coverage factor used where U is printed."""
    bound: tuple[str, float] | None = None
    """Censored: (`above`, x) or (`below`, x) in the limit's unit."""
    at_least: float | None = None
    """Lower limit."""
    at_most: float | None = None
    """Upper limit."""
    acceptance_at_least: float | None = None
    """Lower acceptance limit after the guard band."""
    acceptance_at_most: float | None = None
    """Upper acceptance limit after the guard band."""
    rule: str = ""
    """Decision rule."""
    conformance_probability: float = 0.95
    """Asked for."""
    probability: float | None = None
    """Probability of conformity of the value as measured (JCGM 106:2012, 7)."""
    part: str = "system"
    """`system` or `lens`."""
    estimator: str = ""
    """Estimator of the readings behind it."""
    parameters: Mapping[str, Amount] = field(default_factory=dict)
    """What the quantity is taken at."""
    at_fault: str | None = None
    """None, `unit`, `capture`, `cannot tell` or `program`."""
    because: str | None = None
    """Why that is at fault."""
    attempt: int = 1
    """Attempt judged."""
    place: str = ""
    """`where` in words; where it is empty, what the capture is checked on as a whole."""
    steps: str = ""
    """How a combination came about from its members, as a sentence; empty for a single region."""


@dataclass(frozen=True)
class CaptureState:
    """Whether a capture may be judged at all."""

    name: str
    """Capture."""
    attempt: int
    """Attempt."""
    usable: bool
    """Judged before the limits."""
    faults: tuple[str, ...] = ()
    """One plain sentence each."""
    at_fault: str | None = None
    """Who is at fault when it is not usable."""
    because: str | None = None
    """Why."""


@dataclass(frozen=True)
class Judgement:
    """What is decided about one unit."""

    verdict: str
    """One of `VERDICTS`."""
    at_fault: str | None
    """None, `unit`, `capture`, `cannot tell` or `program`."""
    because: str
    """Why, one sentence."""
    reasons: tuple[str, ...]
    """One plain sentence each, worst first."""
    next: str
    """What the operator does now."""
    checks: tuple[Check, ...]
    """Every limit's checks."""
    captures: tuple[CaptureState, ...]
    """Every capture's state."""
