"""A check on paper: digits that show why it fell, limits as asked, causes said once."""

from typing import Any

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from runner.report.check_facts import (
    acceptance_text,
    blame_texts,
    check_fact,
    limit_text,
    probability_text,
    reason_texts,
    value_text,
    why_facts,
)

VALUES = st.floats(0.01, 10)
GAPS = st.floats(1e-7, 0.01)
BARE: dict[str, Any] = {"spec": {}}
"""A document in which no capture has regions."""


def _check(**more: Any) -> dict[str, Any]:
    known = {
        "characteristic": 2,
        "capture": "chart",
        "where": "centre",
        "channel": "mono",
        "label": "mtf50",
        "value": 0.25,
        "u": 0.01,
        "bound": None,
        "measured_in": "cy/px",
        "at_least": 0.2,
        "at_most": None,
        "acceptance": {"at_least": 0.2164, "at_most": None},
        "probability": 0.9999,
        "conformance_probability": 0.95,
        "verdict": "conforms",
        "at_fault": None,
        "because": None,
        "reason": "centre: mtf50 0.250",
    }
    return known | more


def _number(text: str) -> float:
    """Return the first number of a cell."""
    return float(text.replace("\N{NO-BREAK SPACE}", " ").lstrip("≥≤ ").split()[0])


def test_a_row_as_it_is_printed() -> None:
    """Value with U = 2u to two digits (JCGM 100, 7.2.6), limits with unit, the acceptance limit in the same digits."""
    row = check_fact(_check(), BARE)
    cells = (row.number, row.where, row.quantity, row.value, row.limit, row.acceptance, row.probability)

    assert tuple(" ".join(cell.split()) for cell in cells) == (
        "2",
        "centre",
        "mtf50",
        "0.250 ± 0.020 cy/px",
        "≥ 0.2 cy/px",
        "≥ 0.216",
        "> 99.9 %",
    )
    assert (row.verdict.word, row.verdict.slug) == ("conforms", "conforms")


@given(limit=VALUES, gap=GAPS, u=st.floats(1e-5, 0.1), lower=st.booleans())
def test_a_value_never_prints_equal_to_a_limit_that_it_misses(limit: float, gap: float, u: float, lower: bool) -> None:
    """However small the miss, the printed value lies on the side of the printed limit that the true one lies on."""
    limit = float(f"{limit:.10g}")  # as a spec has it
    ends = {"at_least": limit, "at_most": None} if lower else {"at_least": None, "at_most": limit}
    for value in (limit - gap, limit + gap):
        check = _check(value=value, u=u, acceptance={"at_least": None, "at_most": None}, **ends)
        shown, end = _number(value_text(check)), _number(limit_text(check))

        assert shown != end
        assert (shown < end) == (value < limit)


@given(accept=VALUES, gap=GAPS, u=st.floats(1e-5, 0.1))
def test_a_value_is_told_from_its_acceptance_limit(accept: float, gap: float, u: float) -> None:
    """Under a guard band it is the acceptance limit that decides: the two printed numbers lie as the true ones do."""
    for value in (accept - gap, accept + gap):
        check = _check(value=value, u=u, at_least=accept - 1.64 * u, acceptance={"at_least": accept, "at_most": None})
        shown, end = _number(value_text(check)), _number(acceptance_text(check))

        assert shown != end
        assert (shown < end) == (value < accept)


@given(asked=st.sampled_from([0.9, 0.95, 0.99, 0.9973]), gap=st.floats(1e-9, 0.04), below=st.booleans())
def test_a_probability_is_told_from_the_one_asked_for(asked: float, gap: float, below: bool) -> None:
    """94.996 % does not print as 95.0 % where 95 % is asked for; nor 5.004 % as 5.0 % at the other end."""
    for edge in (asked, 1 - asked):
        probability = edge - gap if below else edge + gap
        assume(0 < probability < 1)
        text = probability_text(probability, asked)
        if text[0] not in "<>":
            assert (float(text.removesuffix("\u00a0%")) < 100 * edge) == below


@pytest.mark.parametrize(
    ("probability", "asked", "text"),
    [
        (None, 0.95, "–"),
        (0.484, 0.95, "48.4 %"),
        (0.95, 0.95, "95.0 %"),
        (0.05, 0.95, "5.0 %"),
        (0.99949, 0.95, "99.9 %"),
        (1.0, 0.95, "> 99.9 %"),
        (0.0, 0.95, "< 0.1 %"),
        (0.9996, 0.9999, "99.96 %"),
    ],
)
def test_probabilities(probability: float | None, asked: float, text: str) -> None:
    """One decimal where it is enough, a bound near the ends, more where the rule lies there."""
    assert " ".join(probability_text(probability, asked).split()) == text


def test_what_has_no_value_prints_none() -> None:
    """A dash for what was not measured; a bound for a value beyond the band, told from its limit."""
    none = _check(value=None, u=None, probability=None, acceptance={"at_least": None, "at_most": None})

    assert (value_text(none), check_fact(none, BARE).probability, acceptance_text(none)) == ("–", "–", "–")
    assert value_text(_check(value=None, u=None, bound=["above", 0.8])) == "above 0.8 cy/px"
    assert value_text(_check(value=None, u=None, bound=["above", 0.200004])) == "above 0.200004 cy/px"


def test_limits_on_both_sides() -> None:
    """Both ends stand with one unit, each kept on one line; a guard band that eats everything is said in words."""
    both = _check(at_least=0.19, at_most=0.21, acceptance={"at_least": 0.1982, "at_most": 0.2018}, u=0.001)

    assert limit_text(both).split(" and ") == ["≥\u00a00.19", "≤\u00a00.21 cy/px"]
    assert acceptance_text(both).split(" and ") == ["≥\u00a00.1982", "≤\u00a00.2018"]
    assert acceptance_text(_check(acceptance={"at_least": 0.22, "at_most": 0.18})) == "none: no value can be accepted"
    assert limit_text(_check(at_least=None, measured_in="1")) == "–"


def test_channels_are_told_apart() -> None:
    """Rows of one place in several colours differ."""
    assert [check_fact(_check(channel=c), BARE).where for c in ("mono", "red")] == ["centre", "centre, red"]


def test_captures_are_told_apart() -> None:
    """The same quantity of darks and of a chart's regions together reads as two rows."""
    document = {"spec": {"captures": [{"dark": {"target": "dark frame"}}, {"chart": {"regions": {"centre": {}}}}]}}

    assert [check_fact(_check(where="", capture=name), document).where for name in ("dark", "chart")] == [
        "whole frame (dark)",
        "all regions (chart)",
    ]
    assert check_fact(_check(where="", channel="red"), BARE).where == "whole frame (chart), red"


def _lost(number: int, where: str, cause: str, **more: Any) -> dict[str, Any]:
    reason = f"{where}: mtf50 not measured: {cause}"
    known = {"characteristic": number, "where": where, "verdict": "not measured", "reason": reason, "value": None}
    return _check(**(known | {"u": None, "at_fault": "capture", "because": "the lamp was off"} | more))


def test_a_cause_is_said_once_with_all_that_it_took() -> None:
    """Checks lost to one cause stand together, a combination with its members; other causes stand apart."""
    checks = [
        _lost(1, "left", "no edge"),
        _check(),
        _lost(2, "right", "no edge"),
        _lost(3, "range of sides", "left and right: no edge"),
        _lost(4, "centre", "clipped", at_fault="cannot tell", because=""),
    ]

    first, second = why_facts(BARE | {"checks": checks})

    assert (first.cause, second.cause) == ("No edge.", "Clipped.")
    assert [" ".join(name.split()) for name in first.checks.split("; ")] == [
        "1. left: mtf50",
        "2. right: mtf50",
        "3. range of sides: mtf50",
    ]
    assert blame_texts(checks) == ("At fault: the capture, not the unit. The lamp was off.", "At fault: cannot tell.")


def test_reasons_of_one_cause_are_counted() -> None:
    """Page one says a cause once; a reason of another kind, or alone, stays as it is."""
    lost = [_lost(n, where, "no edge")["reason"] for n, where in enumerate(("left", "right", "centre"))]

    assert reason_texts(["left: mtf50 0.19, at least 0.2", *lost]) == (
        "left: mtf50 0.19, at least 0.2.",
        "3 checks not measured: no edge.",
    )
    assert reason_texts(lost[:1]) == ("left: mtf50 not measured: no edge.",)
