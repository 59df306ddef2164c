"""Sentences are kept by their place, each once, in the order in which they came."""

from runner.capture.sentences import Collector


def test_each_sentence_once_in_its_order() -> None:
    """A sentence that two checks find is told once; places do not mix; what is frozen does not change any more."""
    collector = Collector()
    here, there = ("WS8-000101", 1, "chart"), ("WS8-000101", 2, "chart")
    for place, sentence in ((here, "b"), (here, "a"), (there, "a"), (here, "b")):
        collector.put(place, sentence)
    frozen = collector.frozen()
    collector.put(here, "c")

    assert frozen == {here: ("b", "a"), there: ("a",)}
