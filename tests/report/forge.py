"""Real reports changed and signed anew by whoever is asked, and how verifying them ends."""

from collections.abc import Mapping
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from runner.exits import Exit
from runner.report import verify
from runner.report.document import canonical, parse
from runner.report.pdf import render_pdf
from runner.report.sign import sign_detached, sign_pdf
from runner.report.verify_record import Outcome, Terms
from runner.report.verify_tools import default_tools
from tests.report import signed_world as world

TOOLS = world.printed_once(default_tools())


def document() -> dict[str, Any]:
    """Return a copy of a real report's results."""
    return parse((world.shared_bench().unit / "results.json").read_bytes())


def pictures() -> dict[str, bytes]:
    """Return a real report's pictures."""
    return world.pictures_of(world.shared_bench().unit)


def terms(**more: Any) -> Terms:
    """Return the terms of a reader who trusts the authority, changed where asked."""
    usual: dict[str, Any] = {"roots": [world.shared_bench().authority.root], "tools": TOOLS}
    return verify.terms_of(**{**usual, **more})


def outcome_of(folder: Path, name: str, data: bytes, **more: Any) -> Outcome:
    """Write a file into a folder and verify it."""
    (folder / name).write_bytes(data)
    (found,) = verify.verify(folder / name, terms(**more))
    return found


def signed_pdf(shown: Mapping[str, Any], results: bytes | None = None) -> bytes:
    """Sign a PDF that shows one thing and has another attached, if another is given."""
    pdf = render_pdf(shown, pictures(), canonical(shown) if results is None else results)
    return sign_pdf(pdf, world.shared_bench().authority.station, time=datetime.now(UTC))


def outcome_of_page(folder: Path, html: bytes, results: bytes, **more: Any) -> Outcome:
    """Sign a page, lay results and pictures beside it, and verify it."""
    (folder / "results.json").write_bytes(results)
    (folder / "report.html.p7s").write_bytes(sign_detached(html, world.shared_bench().authority.station))
    (folder / "pictures").mkdir()
    for name, data in pictures().items():
        (folder / "pictures" / name).write_bytes(data)
    return outcome_of(folder, "report.html", html, **more)


def refusals(outcome: Outcome) -> str:
    """Return why a report is refused; it must be."""
    assert outcome.exit is Exit.DOES_NOT_CONFORM
    return "; ".join(f"{check.name}: {check.sentence}" for check in outcome.checks if check.held is False)


def left_open(outcome: Outcome) -> list[str]:
    """Return what would have to be accepted of a report that is neither refused nor holds."""
    assert outcome.exit is Exit.CANNOT_DECIDE, outcome.checks
    return [check.accept for check in outcome.checks if check.held is None]
