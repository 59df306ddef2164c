"""A capture and a unit of which nothing is said are plain: one condition, even light, no fault."""

from runner.rehearse.bench_captures import BenchCapture, BenchUnit, Step


def test_nothing_said_is_nothing_wrong() -> None:
    """One step without a label; a lens that neither bends nor scatters; a stream without faults."""
    capture, unit = BenchCapture("plain", (8, 8), 1, None), BenchUnit()

    assert capture.steps == (Step("", 1.0, 0.0),)
    assert capture.firmware
    assert (unit.lens.k1, unit.lens.colours, unit.veil) == (0.0, (1.0, 1.0, 1.0), 0.0)
    assert (unit.stream.lost, unit.stream.repeated, unit.stream.flicker) == ((), (), 0.0)
