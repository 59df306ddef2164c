"""The words of a verdict are a contract."""

from runner.judge import verdict


def test_the_words_are_fixed() -> None:
    """Other programs hold on to these words."""
    assert verdict.VERDICTS == ("conforms", "does not conform", "cannot decide", "not measured")
    assert verdict.REPORT_ONLY not in verdict.VERDICTS
    blames = (verdict.AT_FAULT_UNIT, verdict.AT_FAULT_CAPTURE, verdict.AT_FAULT_CANNOT_TELL, verdict.AT_FAULT_PROGRAM)
    assert blames == ("unit", "capture", "cannot tell", "program")
