"""What a page says: everything that was asked, in the order of what matters, and what it leaves out is told."""

from hashlib import sha256
from typing import Any

import pytest

from runner.report.circumstance_facts import MOST_ROWS
from runner.report.document import canonical
from runner.report.facts import report_facts
from tests.report import printed_world as world


def _many(*verdicts: tuple[str, int]) -> dict[str, Any]:
    """Return results with many checks on one characteristic each, failing values farther and farther out."""
    document = world.document()
    check = document["checks"][1]
    document["checks"] = []
    for verdict, number in verdicts:
        for _ in range(number):
            count = len(document["checks"]) + 1
            lost = verdict == "not measured"
            value = None if lost else (0.25 + 0.001 * count if verdict == "conforms" else 0.19 - 0.0001 * count)
            more = {"reason": f"{count} not measured: no edge"} if lost else {}
            document["checks"].append(check | more | {"characteristic": count, "value": value, "verdict": verdict})
    return document


@pytest.mark.parametrize(
    ("make", "fault"),
    [
        (world.document, ""),
        (world.failing, "At fault: the unit."),
        (world.undecided, ""),
        (world.unmeasured, "At fault: cannot tell."),
    ],
)
def test_page_one_says_who_what_why_and_what_next(make: Any, fault: str) -> None:
    """Verdict, blame, reason and next step come from the results; every limit has its row."""
    document = make()
    facts = report_facts(document)

    assert (facts.verdict.word, facts.fault, facts.next) == (document["verdict"], fault, document["next"])
    assert facts.because.lower().rstrip(".") == document["because"].lower()
    assert facts.reasons
    judged = [c for c in document["checks"] if c["verdict"] != "report only"]
    assert [row.number for row in facts.checks] == [str(c["characteristic"]) for c in judged]
    assert len(facts.checks) + len(facts.reported) == len(document["checks"])
    pairs = dict(facts.who)
    assert (pairs["Lot"], pairs["Operator"], pairs["Station"]) == ("L7", "Kim", "bench 2")


def test_every_page_names_document_unit_and_digest() -> None:
    """The identity holds number, revision, serial and the first digits of the SHA-256 of results.json."""
    document = world.failing()
    digest = sha256(canonical(document)).hexdigest()

    assert report_facts(document).identity == f"WS8-ACC-C / WS8-000103 / {digest[:12]}"
    assert dict(report_facts(document).who)["Digest of the results"] == digest[:16]


@pytest.mark.parametrize(
    ("serial", "parts"),
    [
        ("WS8-000103", ("WS8-000", "103")),
        ("A1", ("A1",)),
        ("12345", ("12", "345")),
        ("PCM", ("PCM",)),
        ("X-1234", ("X-1", "234")),
    ],
)
def test_serials_are_grouped_for_reading_aloud(serial: str, parts: tuple[str, ...]) -> None:
    """The last digits stand in threes; nothing is lost."""
    facts = report_facts(world.document(serial))

    assert facts.serial_parts == parts
    assert "".join(facts.serial_parts) == facts.serial == serial


def test_the_statement_counts_and_names_the_rule() -> None:
    """How many checks ended how, and by which decision rule (ISO/IEC 17025:2017, 7.8.6)."""
    statement, rule, *_ = report_facts(world.failing()).conformity

    assert statement == (
        "Unit WS8-000103, judged by test spec WS8-ACC revision C: does not conform. "
        "Checks: 7; 4 × conforms, 3 × does not conform."
    )
    assert rule.startswith("Decision rule: proof either way at a conformance probability of 95 %. ")


def test_several_rules_are_named_with_their_characteristics() -> None:
    """Where limits have rules of their own, the page says which is for which; simple acceptance asks no probability."""
    document = world.document()
    document["checks"][0] |= {"rule": "simple acceptance"}
    document["checks"][6] |= {"rule": "guarded acceptance", "conformance_probability": 0.9973}

    assert (
        report_facts(document)
        .conformity[1]
        .startswith(
            "Decision rule: simple acceptance for 1; proof either way at a conformance probability of 95 % for 2, 3; "
            "guarded acceptance at a conformance probability of 99.73 % for 4. "
        )
    )


def test_the_nearest_to_their_limits_stand_on_page_one() -> None:
    """Three margins, worst first, by distance in standard uncertainties."""
    titles = [margin.title for margin in report_facts(world.failing()).margins]

    # (0.05 - 0.125) / 0.0028, (0.1732 - 0.2) / 0.0022, (0.1736 - 0.2) / 0.0022
    assert titles == ["3. mtf50, range of corners", "2. mtf50, corners upper right", "2. mtf50, corners lower right"]
    assert report_facts(world.unmeasured()).margins == ()


def test_counts_that_fail_come_before_values_that_fail() -> None:
    """16 hot pixels of 8 stand on page one though they have no U; counts that conform have no distance at all."""
    document = world.failing()
    count = {"where": "", "capture": "dark", "measured_in": "1", "u": 0.0, "at_least": None, "at_most": 8.0}
    count |= {"acceptance": {"at_least": None, "at_most": 8.0}}
    check = document["checks"][0] | count
    failing = check | {"characteristic": 9, "label": "hot pixels", "value": 16.0, "verdict": "does not conform"}
    document["checks"] += [failing, check | {"characteristic": 10, "value": 0.0, "verdict": "conforms"}]

    first, second, _ = report_facts(document).margins

    assert (first.title, second.title) == ("9. hot pixels, whole frame (dark)", "3. mtf50, range of corners")
    assert " ".join(first.text.split()) == "16; limit ≤ 8"


def test_what_fails_is_never_left_out_of_a_long_table() -> None:
    """Paper holds 60 rows: first what fails, then what is undecided or lost, then what is nearest; the rest is told."""
    facts = report_facts(_many(("not measured", 50), ("conforms", 40), ("does not conform", 12), ("cannot decide", 3)))
    words = [row.verdict.word for row in facts.checks]

    assert len(words) == MOST_ROWS == 60
    assert (words.count("does not conform"), words.count("cannot decide"), words.count("not measured")) == (12, 3, 45)
    assert facts.left_out == "45 more checks stand in results.json: 5 × not measured, 40 × conforms."
    assert [int(row.number) for row in facts.checks] == sorted(int(row.number) for row in facts.checks)


def test_nearest_conforming_checks_stay() -> None:
    """Of many that conform the ones nearest to their limits are printed."""
    facts = report_facts(_many(("conforms", 70)))

    assert [int(row.number) for row in facts.checks] == list(range(1, 61))
    assert facts.left_out == "10 more checks stand in results.json: 10 × conforms."
    assert report_facts(_many(("conforms", 60))).left_out == ""


def test_reasons_beyond_page_one_are_pointed_to() -> None:
    """Four reasons, then how many more there are."""
    document = world.failing() | {"reasons": [f"reason {n}" for n in range(6)]}

    assert report_facts(document).reasons == ("reason 0.", "reason 1.", "reason 2.", "reason 3.")
    assert report_facts(document).more_reasons == "2 more reasons stand in the results below."
    one = document | {"reasons": document["reasons"][:5]}
    assert report_facts(one).more_reasons == "1 more reason stands in the results below."


def test_a_rehearsal_says_so() -> None:
    """A simulated unit has a band across page one, a real one none."""
    document = world.document()

    assert report_facts(document).simulated == ""
    assert "no evidence of any unit" in report_facts(document | {"simulated": True}).simulated


def test_what_captures_share_is_said_once() -> None:
    """Equal conditions stand in one table, and a frame that two captures use in one row."""
    document = world.document()
    facts = report_facts(document)

    assert [table.title for table in facts.conditions] == ["dark (dark frame), chart (slanted edge)"]
    document["captures"][0]["conditions"] = [["tone", "linear"]]
    document["captures"][0]["frames"] = document["captures"][1]["frames"]
    assert len(report_facts(document).conditions) == 2
    assert [row[0] for row in report_facts(document).frames] == ["chart-1.tif", "chart-2.tif"]
