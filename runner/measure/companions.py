"""Frames of companion captures, by role, cut to the region that a method looks at."""

from collections.abc import Callable, Mapping, Sequence

from runner.capture.frame import Box, Crop, Frame, crop
from runner.errors import FrameRefused
from runner.measure.plan import Plan

Loader = Callable[[str], Sequence[Frame]]
"""Gives the frames of a capture by its name; raises FrameRefused."""


class Companions:
    """Frames of companion captures, read when first needed and kept while this attempt is measured."""

    def __init__(self, plan: Plan, load: Loader, known_faults: Mapping[str, tuple[str, ...]]) -> None:
        self._cameras = {one.capture.name: one.capture.camera for one in plan.captures}
        self._load, self._known_faults = load, known_faults
        self._frames: dict[str, Sequence[Frame]] = {}

    def crops(self, uses: Mapping[str, str], box: Box, channel: str) -> dict[str, tuple[Crop, ...]]:
        """Return the same box out of every companion that could be read; a role without frames is left out."""
        found = {}
        for role, name in uses.items():
            frames, camera = self._read(name), self._cameras[name]
            if frames and channel in camera.channels:
                found[role] = tuple(crop(frame, box, camera, channel) for frame in frames)
        return found

    def by_channel(self, uses: Mapping[str, str], box: Box) -> dict[str, dict[str, tuple[Crop, ...]]]:
        """Return the same in every colour channel of each companion: by role, then by channel."""
        return {
            role: {channel: self.crops({role: name}, box, channel)[role] for channel in self._cameras[name].channels}
            for role, name in uses.items()
            if self._read(name)
        }

    def lost(self, uses: Mapping[str, str]) -> dict[str, str]:
        """Return the roles whose capture gave no frames, each with the capture's name."""
        return {role: name for role, name in uses.items() if not self._read(name)}

    def _read(self, name: str) -> Sequence[Frame]:
        if name not in self._frames:
            try:
                self._frames[name] = () if self._known_faults.get(name) else self._load(name)
            except FrameRefused:
                self._frames[name] = ()  # the companion's own capture tells why
        return self._frames[name]
