"""Whose fault a missing value is: one row a cause, the same for every method.

The capture is blamed only by what does not depend on the unit's own sharpness: the file, the level against dark, the
geometry. Where a sound unit on a bad bench and a bad unit on a sound bench look alike, nobody is blamed, and the
sentence says which frame would settle it.
"""

from collections.abc import Mapping
from dataclasses import dataclass

from runner.judge.verdict import AT_FAULT_CANNOT_TELL, AT_FAULT_CAPTURE, AT_FAULT_PROGRAM

SETTLE = "a frame of a unit known to be good, on the same chart and station, would settle it"


@dataclass(frozen=True)
class Blame:
    """What a cause says about who is at fault."""

    at_fault: str
    """Word of `verdict`."""
    because: str
    """Why, one clause."""


BY_CAUSE: Mapping[str, Blame] = {
    "clipped": Blame(AT_FAULT_CAPTURE, "the exposure drives the region to an end of the range"),
    "too dark": Blame(AT_FAULT_CAPTURE, "the frame lies at the dark level: the light did not reach the chart"),
    "too bright": Blame(AT_FAULT_CAPTURE, "the frame lies at the white level: there was too much light"),
    "no modulation": Blame(AT_FAULT_CANNOT_TELL, f"a wholly defocused unit and a missing chart look alike; {SETTLE}"),
    "no edge": Blame(AT_FAULT_CANNOT_TELL, f"a wholly defocused unit and a missing chart look alike; {SETTLE}"),
    "two edges": Blame(
        AT_FAULT_CAPTURE, "the region holds more of the chart than one edge: chart or region is misplaced"
    ),
    "edge not straight": Blame(
        AT_FAULT_CANNOT_TELL, f"distortion of the unit and a damaged or bent chart look alike; {SETTLE}"
    ),
    "edge too near an axis": Blame(AT_FAULT_CAPTURE, "the chart was not turned against the pixel rows as it must be"),
    "too few crossings": Blame(AT_FAULT_CAPTURE, "chart or region leaves too short an edge"),
    "off the frame": Blame(AT_FAULT_CAPTURE, "the region does not lie in the frame"),
    "outside the estimator's limits": Blame(
        AT_FAULT_CAPTURE, "the region is outside what this estimator may be used on"
    ),
    "undersampled": Blame(AT_FAULT_CAPTURE, "the chart was turned to an angle at which the pixels sample too coarsely"),
    "no picture": Blame(
        AT_FAULT_CANNOT_TELL, f"the frame holds no picture at all, from the unit or from the link to it; {SETTLE}"
    ),
    "uneven": Blame(AT_FAULT_CANNOT_TELL, f"uneven light and a shading unit look alike; {SETTLE}"),
    "too noisy": Blame(AT_FAULT_CANNOT_TELL, f"too little light and a noisy unit look alike; {SETTLE}"),
    "missing companion": Blame(AT_FAULT_CAPTURE, "a companion capture that it needs cannot be used"),
    "too few frames": Blame(AT_FAULT_CAPTURE, "the quantity needs more frames of the same scene than were captured"),
    "another scene": Blame(AT_FAULT_CAPTURE, "the region holds something else: chart or region is misplaced"),
    "not defined": Blame(AT_FAULT_CANNOT_TELL, f"the curve does not have this property; {SETTLE}"),
    "fault": Blame(AT_FAULT_PROGRAM, "the program failed; keep the frames and tell whoever maintains it"),
}
"""Cause (a word of `measure.reading.CAUSES`) to blame."""

UNUSABLE: Mapping[str, Blame] = {
    "level": Blame(AT_FAULT_CAPTURE, "the light level is not what the spec demands"),
    "clipped": Blame(AT_FAULT_CAPTURE, "the exposure drives pixels to an end of the range"),
}
"""Quantity of a `usable_if` that does not hold to blame."""
UNUSABLE_OTHERWISE = Blame(AT_FAULT_CANNOT_TELL, f"the capture or the unit may cause it; {SETTLE}")
FILE = Blame(AT_FAULT_CAPTURE, "a file cannot be evidence")
CHART = Blame(AT_FAULT_CAPTURE, "the chart is another one, does not lie in the frame as it must, or may not be used")
"""For sentences about a chart that has a file."""
UNDECIDED = Blame(AT_FAULT_CANNOT_TELL, f"the capture or the unit may cause what the frame shows; {SETTLE}")
"""For files whose sentence says that both look alike."""
TWO_ATTEMPTS = Blame(AT_FAULT_CANNOT_TELL, "there are two valid attempts and the spec has no rule for them")
