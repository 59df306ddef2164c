"""`probatum verify`: does a report hold?"""

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
    exits = []
    for path in reports:
        for outcome in verify.verify(path, terms):
            _tell(outcome, quiet=quiet)
            exits.append(outcome.exit)
    return most_serious(exits)


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


def _tell(outcome: "Outcome", *, quiet: bool) -> None:
    if quiet and outcome.exit is Exit.CONFORMS:
        return
    print(f"{outcome.path}: {_ENDS[outcome.exit]}")
    for check in outcome.checks:
        if not quiet or check.held is not True:
            print(f"  {_word(check, outcome):8} {check.name}: {check.sentence}")
    for remark in () if quiet else outcome.remarks:
        print(f"  {'note':8} {remark}")


def _word(check: "Check", outcome: "Outcome") -> str:
    if check.held is None:
        return "accepted" if check.accept in outcome.accept else "open"
    return SYMBOLS[check.held]
