"""The family of errors and what each says."""

from runner.errors import Complaint, FrameRefused, MeasurementRefused, SpecError, UsageError


def test_a_complaint_is_one_line_of_four_parts() -> None:
    """A complaint says where, what was found, what is allowed and what to do, in this order."""
    complaint = Complaint("a.yaml:3:5", "unknown key 'limts'", "known are: limits", "did you mean 'limits'?")

    assert str(complaint) == "a.yaml:3:5: unknown key 'limts'; known are: limits; did you mean 'limits'?"


def test_a_warning_is_marked_as_one() -> None:
    """A warning can be told from an error in its line."""
    assert str(Complaint("a.yaml:1:1", "x", severity="warning")) == "a.yaml:1:1: warning: x"


def test_an_error_without_a_place_leaves_it_out() -> None:
    """No empty place stands in front of a sentence."""
    assert str(UsageError("it is gone", next_step="look again")) == "it is gone; look again"
    assert str(FrameRefused("it is empty", where="a.tif")) == "a.tif: it is empty"


def test_a_spec_error_holds_all_complaints() -> None:
    """All complaints are told at once, one a line."""
    error = SpecError((Complaint("a:1:1", "x"), Complaint("a:2:1", "y")))

    assert str(error) == "a:1:1: x\na:2:1: y"
    assert isinstance(error, UsageError)


def test_a_refused_measurement_names_its_cause() -> None:
    """The cause is a word that the judge can look up."""
    assert MeasurementRefused("no edge", "nothing there").cause == "no edge"
