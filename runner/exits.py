"""Exit codes: a contract with production lines and CI jobs, never renumbered."""

from enum import IntEnum


class Exit(IntEnum):
    """What the process says to its caller when it ends."""

    CONFORMS = 0
    """Every unit conforms (or: nothing to complain about)."""
    DOES_NOT_CONFORM = 1
    """At least one unit does not conform; for `verify`: the report is refused."""
    USAGE = 2
    """The command line or the spec is wrong; nothing was judged."""
    CANNOT_DECIDE = 3
    """Nothing fails, but a unit cannot be decided; for `verify`: sound, but the signer is not vouched for."""
    NOT_MEASURED = 4
    """Nothing fails, but a unit was not measured, or there was nothing to judge."""
    FAULT = 70
    """A fault of the program itself."""
    INTERRUPTED = 130
    """Interrupted from the keyboard."""


SEVERITY = (Exit.FAULT, Exit.USAGE, Exit.DOES_NOT_CONFORM, Exit.NOT_MEASURED, Exit.CANNOT_DECIDE, Exit.CONFORMS)
"""Most serious first."""


def most_serious(codes: "list[Exit] | tuple[Exit, ...]") -> Exit:
    """Return the most serious of some exit codes; an empty list means that nothing was judged."""
    for code in SEVERITY:
        if code in codes:
            return code
    return Exit.NOT_MEASURED
