"""The family of expected errors: each says where, what was found, what is allowed and what to do next.

ProbatumError
├── UsageError            the command line, a key, a folder: exit 2
│   └── SpecError         a spec or station file, with all complaints at once: exit 2
├── ShelfError            a target or method module that cannot be used: exit 2
├── FrameRefused          a file that cannot be evidence; its capture is not measured
├── MeasurementRefused    a method that will not give a value for its region; the check is `not measured`
├── SigningError          a report could not be signed: exit 2
├── StorageError          results that cannot be written, a full disk or a lost folder: exit 70
└── VerificationRefused   a report that does not hold: exit 1
"""

from dataclasses import dataclass


@dataclass(frozen=True)
class Complaint:
    """One thing wrong with a file that a person wrote."""

    where: str
    """`file:line:col`, or the path inside the document where there are no lines."""
    found: str
    """What stands there, as a sentence without its full stop."""
    allowed: str = ""
    """What may stand there, or the nearest known key."""
    next_step: str = ""
    """What to do."""
    severity: str = "error"
    """`error` or `warning`."""

    def __str__(self) -> str:
        """One line: where, found, allowed, next step."""
        tail = "; ".join(part for part in (self.allowed, self.next_step) if part)
        mark = "" if self.severity == "error" else "warning: "
        return f"{self.where}: {mark}{self.found}" + (f"; {tail}" if tail else "")


class ProbatumError(Exception):
    """An expected failure, told in one sentence of four parts."""

    def __init__(self, found: str, *, where: str = "", allowed: str = "", next_step: str = "") -> None:
        self.found, self.where, self.allowed, self.next_step = found, where, allowed, next_step
        super().__init__(str(Complaint(where, found, allowed, next_step)) if where else self._sentence())

    def _sentence(self) -> str:
        return "; ".join(part for part in (self.found, self.allowed, self.next_step) if part)


class UsageError(ProbatumError):
    """Raised when the command line, a key or a folder cannot be used."""


class SpecError(UsageError):
    """Raised with every complaint about a spec or station file at once."""

    def __init__(self, complaints: tuple[Complaint, ...]) -> None:
        self.complaints = complaints
        super().__init__("\n".join(str(c) for c in complaints))


class ShelfError(ProbatumError):
    """Raised when a target or method module cannot be loaded or breaks its contract; names the file."""


class FrameRefused(ProbatumError):
    """Raised when a file cannot be evidence: truncated, wrong size, twice the same, of another unit."""


class MeasurementRefused(ProbatumError):
    """Raised by a method or target that will not give a value; `cause` is a word from `measure.reading.CAUSES`."""

    def __init__(self, cause: str, found: str, *, where: str = "", allowed: str = "", next_step: str = "") -> None:
        self.cause = cause
        super().__init__(found, where=where, allowed=allowed, next_step=next_step)


class SigningError(ProbatumError):
    """Raised when a report cannot be signed or its time stamp cannot be had."""


class StorageError(ProbatumError):
    """Raised when results cannot be written: a full disk, a folder that is gone."""


class VerificationRefused(ProbatumError):
    """Raised when a report does not hold: changed, not signed, not following from its readings."""
