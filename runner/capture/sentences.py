"""Sentences about captures, gathered by the place that they speak of."""

from collections.abc import Mapping

Place = tuple[str, int, str]
"""Serial, attempt, capture."""


class Collector:
    """Gathers sentences by place, each once, in the order in which they come."""

    def __init__(self) -> None:
        self._found: dict[Place, dict[str, None]] = {}

    def put(self, place: Place, sentence: str) -> None:
        """Note a sentence."""
        self._found.setdefault(place, {})[sentence] = None

    def frozen(self) -> Mapping[Place, tuple[str, ...]]:
        """Return what was gathered."""
        return {place: tuple(sentences) for place, sentences in self._found.items()}
