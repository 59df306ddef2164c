"""Binds verification to the rest of the program, each part when it is first used."""

import shutil
import tempfile
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from runner.errors import VerificationRefused
from runner.report.verify_record import Tools


def default_tools() -> Tools:
    """Return the program's own tools."""
    return Tools(
        program=_program,
        parse=_parse,
        render_pdf=_render_pdf,
        html_page=_html_page,
        judge_again=_judge_again,
        measure_again=_measure_again,
        lot_files=_lot_files,
    )


def _program() -> dict[str, Any]:
    from runner.report.document import program  # noqa: PLC0415 - heavy

    return program()


def _parse(data: bytes) -> dict[str, Any]:
    from runner.report.document import parse  # noqa: PLC0415 - heavy

    return parse(data)


def _render_pdf(document: Mapping[str, Any], pictures: Mapping[str, bytes], results: bytes) -> bytes:
    from runner.report.pdf import render_pdf  # noqa: PLC0415 - heavy

    _need_edition(document)
    return render_pdf(document, pictures, results)


def _html_page(document: Mapping[str, Any], pictures: Mapping[str, bytes]) -> str:
    from runner.report.page import html_page  # noqa: PLC0415 - heavy

    _need_edition(document)
    return html_page(document, pictures)


def _need_edition(document: Mapping[str, Any]) -> None:
    from runner.report.page import EDITION  # noqa: PLC0415 - heavy

    edition = document["program"]["template"]
    if edition != EDITION:
        found = f"it was printed with edition {edition} of the templates, this version has {EDITION}"
        raise VerificationRefused(found, next_step="verify it with a version that has them")


def _judge_again(document: Mapping[str, Any]) -> dict[str, Any]:
    from runner.judge.unit import judge_unit  # noqa: PLC0415 - heavy
    from runner.measure.plan import bind  # noqa: PLC0415
    from runner.report.document import from_document, to_document  # noqa: PLC0415

    spec, evidence = from_document(document)
    facts = _facts(document)
    plan = bind(spec, facts.station)
    judgement = judge_unit(plan.spec, evidence)
    return to_document(
        plan,
        evidence,
        judgement,
        facts,
        unused=tuple(document["unused"]),
        pictures=tuple(document["pictures"]),
        earlier=document["earlier"],
    )


def _measure_again(document: Mapping[str, Any], frames: Path) -> tuple[dict[str, Any], dict[str, bytes]]:
    from runner.acceptance import measure_unit  # noqa: PLC0415 - the one way back to the whole run
    from runner.capture import integrity  # noqa: PLC0415
    from runner.capture.lot import find_lot  # noqa: PLC0415
    from runner.judge.unit import judge_unit  # noqa: PLC0415
    from runner.measure.plan import bind  # noqa: PLC0415
    from runner.report.document import from_document, to_document  # noqa: PLC0415

    spec, _ = from_document(document)
    serial = document["unit"]["serial"]
    facts = _facts(document)
    plan = bind(spec, facts.station)
    lot = find_lot(frames, spec, (serial,))
    units = [unit for unit in lot.units if unit.serial == serial]
    if not units:
        raise VerificationRefused(f"there are no frames of unit {serial}", where=str(frames))
    evidence, pictures, _tracebacks = measure_unit(plan, units[0], integrity.survey(lot, spec, 1), facts.time)
    judgement = judge_unit(plan.spec, evidence)
    return to_document(plan, evidence, judgement, facts), pictures


def _facts(document: Mapping[str, Any]) -> Any:
    from runner.report.document import RunFacts  # noqa: PLC0415 - heavy
    from runner.spec.station import from_raw  # noqa: PLC0415

    raw = {key: value for key, value in document["station"].items() if key != "digest"}
    return RunFacts(document["time"], document["unit"]["lot"], document["operator"], from_raw(raw))


def _lot_files(lot: Mapping[str, Any], documents: tuple[Mapping[str, Any], ...]) -> dict[str, bytes]:
    from runner.report import lot_files, store  # noqa: PLC0415 - heavy
    from runner.report.document import canonical, from_document  # noqa: PLC0415

    spec, _ = from_document(documents[0])
    scratch = Path(tempfile.mkdtemp())
    try:
        for number, document in enumerate(documents):  # a serial is a stranger's word until it is vouched for: no path
            (scratch / str(number)).mkdir()
            (scratch / str(number) / store.RESULTS).write_bytes(canonical(document))
        lot_files.write_lot_files(scratch, spec, _facts(documents[0]), tuple(lot["unused"]))
        return {file.name: file.read_bytes() for file in sorted(scratch.iterdir()) if file.is_file()}
    finally:
        shutil.rmtree(scratch, ignore_errors=True)
