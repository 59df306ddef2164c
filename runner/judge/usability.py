"""Whether a capture may be judged at all: its files and its `usable_if`, before any limit."""

from collections.abc import Sequence
from math import isfinite

from runner.capture.fitness import UNDECIDED
from runner.judge import blame
from runner.judge.sentences import show
from runner.judge.verdict import CaptureState
from runner.measure.chart_view import BEGINS
from runner.measure.evidence import CaptureEvidence
from runner.measure.reading import Reading
from runner.spec import units
from runner.spec.model import Bound, Capture


def judge_capture(capture: Capture, evidence: CaptureEvidence, readings: Sequence[Reading]) -> CaptureState:
    """Return the state of one attempt of a capture.

    Args:
        capture: As asked.
        evidence: Its files and their faults.
        readings: All readings of this capture and attempt.
    """
    if evidence.faults:
        return _state(evidence, evidence.faults, [_of_file(sentence) for sentence in evidence.faults])
    if not evidence.frames and capture.usable_if:
        return CaptureState(evidence.name, evidence.attempt, usable=True)  # nothing measured: each limit tells why
    faults: list[str] = []
    blames: list[blame.Blame] = []
    for bound in capture.usable_if:
        sentences = _broken(capture, bound, [r for r in readings if r.quantity == bound.quantity])
        faults += sentences
        blames += [blame.UNUSABLE.get(bound.quantity, blame.UNUSABLE_OTHERWISE)] * len(sentences)
    return _state(evidence, tuple(faults), blames)


def _of_file(sentence: str) -> blame.Blame:
    if UNDECIDED in sentence:
        return blame.UNDECIDED
    return blame.CHART if sentence.startswith(BEGINS) else blame.FILE


def _broken(capture: Capture, bound: Bound, readings: Sequence[Reading]) -> list[str]:
    if not readings:
        return [f"{bound.quantity.replace('_', ' ')} was not measured, and the capture must not be used without it"]
    context = units.context_of(capture.camera, capture.optics)
    sentences = []
    for reading in readings:
        if reading.refusal is not None:
            continue  # the region gave no value: its own checks say so
        value = (
            None if reading.value is None else units.convert(reading.value, reading.measured_in, bound.unit, context)
        )
        if value is None or not isfinite(value):
            sentences.append(f"{_place(reading)}{reading.label} gave no number")
        elif (bound.at_least is not None and value < bound.at_least) or (
            bound.at_most is not None and value > bound.at_most
        ):
            found = show(value, None, bound.unit, against=(bound.at_least, bound.at_most))
            sentences.append(f"{_place(reading)}{reading.label} {found}, {_words(bound)} makes the capture usable")
    return sentences


def _place(reading: Reading) -> str:
    words = reading.region if reading.channel == "mono" else f"{reading.region} {reading.channel}".strip()
    return f"{words}: " if words else ""


def _words(bound: Bound) -> str:
    unit = "" if bound.unit == "1" else f" {bound.unit}"
    parts = [f"at least {bound.at_least:g}{unit}"] if bound.at_least is not None else []
    parts += [f"at most {bound.at_most:g}{unit}"] if bound.at_most is not None else []
    return " and ".join(parts)


def _state(evidence: CaptureEvidence, faults: tuple[str, ...], blames: Sequence[blame.Blame]) -> CaptureState:
    if not faults:
        return CaptureState(evidence.name, evidence.attempt, usable=True)
    first = next((b for b in blames if b.at_fault == "capture"), blames[0])
    return CaptureState(
        evidence.name, evidence.attempt, usable=False, faults=faults, at_fault=first.at_fault, because=first.because
    )
