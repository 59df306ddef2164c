"""What writing down and signing one unit costs: 30 checks, 6 overview pictures, 6 transfer curves, 6 edge fits."""

from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

from runner import acceptance
from runner.acceptance import Job, Order
from runner.judge.unit import judge_unit
from runner.report.document import canonical, parse
from runner.report.page import html_page
from runner.report.pdf import render_pdf
from runner.report.sign import sign_detached, sign_pdf
from runner.report.unit_files import unit_files
from tests.benchmarks.side_by_side import Row, best_cpu, show
from tests.benchmarks.workload import lay_out_pictures

if TYPE_CHECKING:
    from collections.abc import Callable

ROUNDS = 9


@pytest.mark.benchmark
def test_the_report_of_30_checks_and_6_pictures(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """JSON, HTML, PDF and both signatures take at most 1.2 s of a warm process."""
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    order = Order(spec=lay_out_pictures(tmp_path), frames=tmp_path / "frames", out=tmp_path / "out")
    plan, facts = acceptance.read(order)
    lot, seen = acceptance.gather(order, plan)
    job, unit = Job(replace(order, time=facts.time), plan, facts, seen), lot.units[0]
    evidence, pictures, _ = acceptance.measure_unit(plan, unit, seen)
    judgement = judge_unit(plan.spec, evidence)
    key = acceptance._signer(job.order)

    def document() -> dict[str, Any]:
        return acceptance._document(job, unit, evidence, judgement, pictures)

    def whole() -> dict[str, bytes]:
        return unit_files(document(), pictures, key, [])

    files = whole()
    results = canonical(document())
    read_back = parse(results)
    html, pdf = html_page(read_back, pictures).encode(), render_pdf(read_back, pictures, results)
    contestants: dict[str, Callable[[], object]] = {
        "whole": whole,
        "json": lambda: parse(canonical(document())),
        "html": lambda: html_page(read_back, pictures),
        "pdf": lambda: render_pdf(read_back, pictures, results),
        "sign html": lambda: sign_detached(html, key),
        "sign pdf": lambda: sign_pdf(pdf, key, time=datetime.now(UTC)),
    }
    best = {name: 1000 * spent for name, spent in best_cpu(contestants, ROUNDS).items()}
    rows = [
        Row("JSON, HTML, PDF, both signatures", best["whole"], "ms", 1200),
        Row("of it: results, written and read back", best["json"], "ms"),
        Row("of it: HTML", best["html"], "ms"),
        Row("of it: PDF", best["pdf"], "ms"),
        Row("of it: signature of the HTML", best["sign html"], "ms"),
        Row("of it: signature of the PDF", best["sign pdf"], "ms"),
        Row("size of the PDF", len(files["report.pdf"]) / 1000, "kB"),
        Row("size of the HTML", len(files["report.html"]) / 1000, "kB"),
    ]
    show("One unit's report, 30 checks and 6 pictures: best CPU time of a warm process", rows)

    assert (len(judgement.checks), len(pictures), judgement.verdict) == (30, 6, "conforms")
