"""`probatum verify`: does a report hold?"""

from collections.abc import Iterable, Iterator
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import click

from runner.errors import UsageError
from runner.exits import Exit, most_serious

if TYPE_CHECKING:
    from runner.report.verify_record import Check, Outcome

WORDS = {
    "unknown-signer": "nobody vouches for the signer",
    "unvouched-stamp": "nobody vouches for the time-stamp server",
    "crl-out-of-date": "the revocation list is old or another authority's",
    "page-by-text": "only the text of the page could be compared",
    "page-not-compared": "the page could not be compared",
    "wording-not-compared": "another version wrote the sentences",
    "pictures-not-compared": "pictures painted again differ",
}
"""What `--accept` takes; a test holds it against `report.verify_record`, which is not loaded for `--help`."""
SYMBOLS = {True: "holds", False: "REFUSED", None: "open"}


@click.command("verify")
@click.argument("reports", nargs=-1, required=True, type=click.Path(path_type=Path))
@click.option(
    "--root", "roots", multiple=True, type=click.Path(path_type=Path), help="Certificate of a trusted authority."
)
@click.option("--crl", "crls", multiple=True, type=click.Path(path_type=Path), help="Revocation list.")
@click.option("--accept", multiple=True, type=click.Choice(list(WORDS)), help="Take this as good; see below.")
@click.option("--frames", type=click.Path(path_type=Path), help="Folder of frames: check digests and measure again.")
@click.option("--serial", help="The unit that the report must be of.")
@click.option("--spec-digest", metavar="sha256:…", help="The spec that the report must be judged by.")
@click.option("--quiet", is_flag=True, help="Print only what does not hold.")
def command(  # noqa: D103 - the help text stands below
    reports: tuple[Path, ...],
    roots: tuple[Path, ...],
    crls: tuple[Path, ...],
    accept: tuple[str, ...],
    frames: Path | None,
    serial: str | None,
    spec_digest: str | None,
    quiet: bool,
) -> Exit:
    from runner.report import keys, verify  # noqa: PLC0415 - heavy

    if frames is not None and not frames.is_dir():
        raise UsageError("it is no folder", where=str(frames), next_step="give the folder of frames")
    terms = verify.terms_of(
        roots=[keys.load_certificate(path) for path in roots],
        crl=[keys.load_crl(path) for path in crls],
        accept=accept,
        frames=frames,
        serial=serial,
        spec_digest=spec_digest,
    )
    return most_serious([_tell(path, verify.verify(path, terms), quiet=quiet) for path in reports])


command.help = """Check reports offline: signature, signer, page, verdicts; with --frames measure again.

REPORTS are PDF files, HTML files with their .p7s beside them, units' folders, or folders of lots. Exit codes: 0
everything holds, 1 refused, 2 usage, 3 sound, but something is not vouched for or could not be compared. --accept
names what is good enough all the same:

\b
""" + "\n".join(f"{word:22} {meaning}" for word, meaning in WORDS.items())

_ENDS = {
    Exit.CONFORMS: "everything holds",
    Exit.DOES_NOT_CONFORM: "REFUSED",
    Exit.CANNOT_DECIDE: "sound, but not all of it is vouched for or compared",
}
_STATES = {Exit.CONFORMS: "holds", Exit.DOES_NOT_CONFORM: "REFUSED", Exit.CANNOT_DECIDE: "open"}
_NAMED = 3
"""Units named in one line; of more only their number is told."""


def _tell(path: Path, outcomes: Iterator["Outcome"], *, quiet: bool) -> Exit:
    """Tell about one report in full, about the units of a lot in a line each; return the exit code."""
    units: list[Outcome] = []
    own: list[Outcome] = []
    for outcome in outcomes:
        if outcome.path == path:
            own.append(outcome)
            continue
        if not units and not quiet:
            _say(f"{path}:")
        units.append(outcome)
        _tell_unit(outcome, quiet=quiet)
    end = most_serious([outcome.exit for outcome in (*units, *own)])
    if not units:
        for outcome in own:
            _tell_one(outcome, quiet=quiet)
        return end
    _tell_common(units, quiet=quiet)
    for outcome in own:
        _tell_own(outcome, quiet=quiet)
    if not quiet or end is not Exit.CONFORMS:
        bad = sum(outcome.exit is Exit.DOES_NOT_CONFORM for outcome in units)
        whole = "the lot's own files" if end is Exit.DOES_NOT_CONFORM else f"{len(units)} units"
        _say(f"{path}: {_ENDS[end]} ({f'{bad} of {len(units)} units' if bad else whole})")
    return end


def _tell_one(outcome: "Outcome", *, quiet: bool) -> None:
    if quiet and outcome.exit is Exit.CONFORMS:
        return
    _say(f"{outcome.path}: {_ENDS[outcome.exit]}")
    if not quiet and outcome.document is not None and outcome.exit is not Exit.DOES_NOT_CONFORM:
        asked = outcome.document["document"]
        tested = f"by {asked['number']} revision {asked['revision']}, {outcome.document['time']}"
        _row("says", f"unit {outcome.document['unit']['serial']}: {_verdict(outcome)} ({tested})")
    for files, check in _merged(outcome.checks):
        if not quiet or check.held is not True:
            _row(_word(check, outcome), f"{files}{check.name}: {check.sentence}")
    for remark in () if quiet else outcome.remarks:
        _row("note", remark)


def _tell_unit(outcome: "Outcome", *, quiet: bool) -> None:
    state = _STATES[outcome.exit]
    if outcome.exit is Exit.CONFORMS and any(check.held is None for check in outcome.checks):
        state = "accepted"
    if not quiet or outcome.exit is not Exit.CONFORMS:
        _row(state, f"{outcome.path.name}  {_verdict(outcome)}".rstrip())
    for check in outcome.checks:
        if check.held is False:
            _row("", f"  {check.name}: {check.sentence}")


def _tell_own(outcome: "Outcome", *, quiet: bool) -> None:
    """Tell about a lot's own files: those that hold in one line."""
    if outcome.document is not None:  # a report that lies among the units' folders
        _tell_unit(outcome, quiet=quiet)
        return
    good = [check.name for check in outcome.checks if check.held]
    if good and not quiet:
        _row("holds", f"{', '.join(good)}: what the units' results give")
    for check in outcome.checks:
        if not check.held:
            _row(_word(check, outcome), f"{check.name}: {check.sentence}")
    for remark in () if quiet else outcome.remarks:
        _row("note", remark)


def _tell_common(units: "list[Outcome]", *, quiet: bool) -> None:
    """Tell once what is open in units that are not refused, and what is remarked of them."""
    rows: dict[tuple[str, str], list[str]] = {}
    for outcome in units:
        if outcome.exit is Exit.DOES_NOT_CONFORM:
            continue  # its own lines say why; what else is open in it decides nothing
        for files, check in _merged(outcome.checks):
            if check.held is None and not (quiet and check.accept in outcome.accept):
                row = (_word(check, outcome), f"{files}{check.name}: {check.sentence}")
                rows.setdefault(row, []).append(outcome.path.name)
        for remark in () if quiet else outcome.remarks:
            rows.setdefault(("note", remark), []).append(outcome.path.name)
    for (word, sentence), names in rows.items():
        few = ", ".join(names) if len(names) <= _NAMED else f"{len(names)} units"
        _row(word, f"{'all units' if len(names) == len(units) > 1 else few}: {sentence}")


def _merged(checks: Iterable["Check"]) -> "list[tuple[str, Check]]":
    """Bring what was found alike in PDF and HTML page together; return the files' names apart from the check."""
    rows: dict[Check, list[str]] = {}
    for check in checks:
        file, _, name = check.name.partition(" ")
        known = file in {"PDF", "HTML"}
        rows.setdefault(replace(check, name=name) if known else check, []).extend([file] if known else [])
    return [(f"{' and '.join(files)} " if files else "", check) for check, files in rows.items()]


def _verdict(outcome: "Outcome") -> str:
    """Return what a report that is not refused says of its unit."""
    if outcome.document is None or outcome.exit is Exit.DOES_NOT_CONFORM:
        return ""
    return f"{outcome.document['verdict']}{', simulated' if outcome.document['simulated'] else ''}"


def _word(check: "Check", outcome: "Outcome") -> str:
    if check.held is None:
        return "accepted" if check.accept in outcome.accept else "open"
    return SYMBOLS[check.held]


def _row(word: str, text: str) -> None:
    _say(f"  {word:8} {text}")


def _say(text: str) -> None:
    """Print a line; names out of reports and certificates must not steer the terminal or turn the line round."""
    print("".join(c if c.isprintable() else c.encode("unicode_escape").decode() for c in text), flush=True)
