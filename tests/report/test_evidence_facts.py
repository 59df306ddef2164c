"""Evidence on a page: each picture with its own attempt's regions, the curves with trouble first, the rest counted."""

from typing import Any

from runner.report.evidence_facts import (
    MOST_REGIONS,
    curve_facts,
    map_facts,
    picture_facts,
    plain_curve_facts,
    plan_facts,
    spot_facts,
)
from tests.report import printed_world as world

BARE: dict[str, Any] = {"spec": {}, "checks": []}
"""A document in which no capture has regions and nothing is checked."""


def test_a_picture_names_its_regions_by_number() -> None:
    """Balloons are numbered from 1 in the order of the regions; the words stand in caption and alternative text."""
    (fact,) = picture_facts(world.failing())

    assert fact.regions == tuple((str(n), name) for n, name in enumerate(world.BOXES, 1))
    assert fact.title == "Regions of 'chart' as found:"
    assert fact.alt.startswith("Frame of chart with regions 1 centre, 2 corners upper left, ")


def test_regions_that_were_not_found_are_told() -> None:
    """Every region of a frame without edges is marked so."""
    (fact,) = picture_facts(world.unmeasured())

    assert {name.endswith(" (not found)") for _, name in fact.regions} == {True}


def test_a_frame_without_regions_is_shown_unless_it_is_even() -> None:
    """A board seen whole is evidence for an auditor; a flat field or a dark frame shows nothing."""
    document = world.document()
    chart = next(c for c in document["captures"] if c["name"] == "chart")
    chart["regions"] = []
    assert [fact.title for fact in picture_facts(document)] == ["First frame of 'chart'"]
    chart["target"] = "flat field"
    assert picture_facts(document) == ()


def test_each_attempt_has_its_own_regions() -> None:
    """The picture of the first attempt is not explained by the regions of the second, whatever their order."""
    document = world.document()
    chart = document["captures"][1]
    lost = [region | {"found": False} for region in chart["regions"]]
    document["captures"].append(chart | {"attempt": 2, "regions": lost})
    second = document["pictures"][0] | {"name": "chart-attempt-2-overview.png", "attempt": 2}
    document["pictures"].insert(0, second)

    two, one = picture_facts(document)

    assert two.title == "Regions of 'chart', attempt 2 as found:"
    assert two.regions[0] == ("1", "centre (not found)")
    assert (one.title, one.regions[0]) == ("Regions of 'chart' as found:", ("1", "centre"))


def test_a_capture_without_regions_needs_no_picture() -> None:
    """A dark frame's overview stays out of the page."""
    document = world.document()
    document["pictures"] = [document["pictures"][0] | {"name": "dark-overview.png", "capture": "dark"}]

    assert picture_facts(document) == ()


def test_regions_with_trouble_come_first() -> None:
    """The soft corners stand before the others; each has its transfer curve and its edge."""
    facts, left = curve_facts(world.failing())

    assert [fact.title for fact in facts[:2]] == [
        "corners upper right (chart, joint fit)",
        "corners lower right (chart, joint fit)",
    ]
    assert (len(facts), left) == (5, 0)
    assert all(fact.edge.count("<svg") == 1 for fact in facts)


def test_limits_are_drawn_where_they_are_asked() -> None:
    """The centre's curve bears its one limit, a corner's its own, and none bears the range's."""
    facts, _ = curve_facts(world.document())
    marks = {fact.title.split(" (")[0]: fact.transfer.count('class="mark"') for fact in facts}

    assert set(marks.values()) == {2}, "a bar and its foot"
    assert set(marks) == set(world.BOXES)


def _with_curves(curves: list[Any]) -> dict[str, Any]:
    document = world.document()
    keys = ("capture", "attempt", "region", "channel", "name", "estimator", "x_in", "y_in")
    rows = [{k: getattr(c, k) for k in keys} | {"x": list(c.x), "y": list(c.y), "u": list(c.u)} for c in curves]
    return document | {"curves": rows}


def test_more_regions_than_a_page_holds_are_counted() -> None:
    """Twelve are drawn, and how many are left out is told."""
    curves = [curve for n in range(MOST_REGIONS + 5) for curve in world.curves_of(f"region {n}")]

    facts, left = curve_facts(_with_curves(curves))

    assert (len(facts), left) == (12, 5)


def test_colours_and_attempts_are_kept_apart() -> None:
    """A curve takes limits and edge of its own channel and attempt only, and its title names them."""
    curves = [*world.curves_of("centre", channel="red"), *world.curves_of("centre", attempt=2)]
    facts, _ = curve_facts(_with_curves(curves))

    assert [fact.title for fact in facts] == [
        "centre, red (chart, joint fit)",
        "centre (chart, attempt 2, joint fit)",
    ]
    assert [fact.transfer.count('class="mark"') for fact in facts] == [0, 0], "the limits are on mono, attempt 1"


def test_a_curve_without_edge_fit_stands_alone() -> None:
    """A method that fits no edge yields a transfer curve only."""
    facts, _ = curve_facts(_with_curves(world.curves_of("centre")[:1]))

    assert [fact.edge for fact in facts] == [""]


def _area(**more: Any) -> dict[str, Any]:
    known = {"region": "patch", "channel": "green", "capture": "stripes", "attempt": 1, "name": "spectrum"}
    drawn = {"x": [-0.5, 0.5], "y": [-0.5, 0.5], "values": [[0, 1], [2, 3]], "axes_in": "cy/px", "values_in": "dB"}
    return known | drawn | {"marks": [[0.0, 0.0, "DC"]]} | more


def test_maps_are_drawn_and_the_rest_is_counted() -> None:
    """Twelve maps are drawn, named by region, channel and capture, with their marks in words; others are counted."""
    facts, left = map_facts(BARE | {"maps": [_area(capture=name) for name in ["stripes", *"abcdefghijklm"]]})

    assert (len(facts), left) == (12, 2)
    assert facts[0].title == "spectrum: patch green (stripes)"
    assert facts[0].alt == "Map of the spectrum: patch green (stripes), marked: DC"
    assert facts[0].png.startswith(b"\x89PNG")
    assert map_facts(BARE) == ((), 0)


def test_of_many_alike_those_with_trouble_are_shown() -> None:
    """Ten spectra of good patches are one, those of bad ones four at most; other captures and kinds have their own."""
    patches = [_area(region=f"patch {n}") for n in range(10)]
    check = {"capture": "stripes", "attempt": 1, "channel": "green", "part": "system", "verdict": "does not conform"}
    bad = [check | {"where": f"patch {n}"} for n in (3, 7)]

    def shown(*checks: dict[str, Any], more: tuple[dict[str, Any], ...] = ()) -> tuple[list[str], int]:
        facts, left = map_facts(BARE | {"maps": [*patches, *more], "checks": list(checks)})
        return [fact.title.split(": ")[1].split(" green")[0] for fact in facts], left

    assert shown() == (["patch 0"], 9)
    assert shown(*bad) == (["patch 3", "patch 7"], 8)
    assert shown(*(check | {"where": f"patch {n}"} for n in range(2, 9))) == ([f"patch {n}" for n in range(2, 6)], 6)
    assert shown(more=(_area(region="x", capture="flat"), _area(region="y", name="shading")))[0] == [
        "patch 0",
        "x",
        "y",
    ]


def test_defects_are_marked_on_a_plan_of_the_frame() -> None:
    """Each capture with defects has a plan that counts them in words; lost frames are no place on a sensor."""
    at = {"region": "", "channel": "mono", "attempt": 1, "x": 12.0, "y": 3.5, "words": ""}
    spots = [
        at | {"capture": c, "kind": k} for c, k in (("dark", "hot pixel"), ("chart", "blemish"), ("dark", "hot pixel"))
    ]
    document = world.document() | {"spots": [*spots, at | {"capture": "chart", "kind": "torn frame"}]}

    dark, chart = plan_facts(document)

    assert (dark.name, dark.title) == ("plan-1.png", "defects: dark")
    assert dark.alt == "Plan of the frame with its defects: dark: 2 × hot pixel"
    assert chart.alt.endswith("chart: 1 × blemish")
    assert plan_facts(world.document()) == ()


def test_other_curves_are_drawn_as_they_are() -> None:
    """A profile belongs to no transfer curve and is drawn alone; edge spreads and residuals are not repeated."""
    curve = {"region": "", "channel": "mono", "capture": "flat", "attempt": 2, "x": [0, 1], "y": [1, 3], "u": []}
    curves = [
        curve | {"name": name, "x_in": "period", "y_in": "DN"} for name in ("stripe profile", "edge spread data", "mtf")
    ]
    facts, left = plain_curve_facts(BARE | {"curves": curves})

    assert [f.title for f in facts] == ["stripe profile: whole frame (flat, attempt 2)"]
    assert "stripe profile, DN" in facts[0].transfer
    assert left == 0


def test_spots_are_rows() -> None:
    """Each spot says what it is, where in px, in which capture, and how far it departs; forty are listed."""
    spot = {"kind": "hot pixel", "x": 12.0, "y": 3.5, "words": "9 times the noise"} | {"region": "", "channel": "mono"}
    rows, left = spot_facts(BARE | {"spots": [spot | {"capture": "dark", "attempt": 1}] * 41})

    assert rows[0] == ("hot pixel", "12, 3.5", "whole frame (dark)", "9 times the noise")
    assert (len(rows), left) == (40, 1)


def test_spots_of_a_failing_count_come_first() -> None:
    """Of more defects than a page lists, those for which the unit fails are never the ones left out."""
    at = {"region": "", "channel": "mono", "attempt": 1, "capture": "flat", "x": 1.0, "y": 1.0, "words": ""}
    spots = [at | {"kind": kind} for kind in [*["bright pixel"] * 50, "blemish", "dead pixel", "defective column"]]
    check = {"capture": "flat", "attempt": 1, "channel": "mono", "where": "", "verdict": "does not conform"}
    checks = [
        check | {"quantity": "defective_columns_centre"},
        check | {"quantity": "blemishes", "verdict": "cannot decide"},
        check | {"quantity": "dead_pixels", "capture": "dark"},
        check | {"quantity": "bright_pixels", "verdict": "conforms"},
    ]

    rows, left = spot_facts({"spots": spots, "checks": checks, "spec": {}})

    assert [row[0] for row in rows[:3]] == ["blemish", "defective column", "bright pixel"]
    assert (len(rows), left) == (40, 13)
