"""`probatum run`: judge every unit found under FRAMES and write its reports."""

import json
import sys
from pathlib import Path
from typing import TYPE_CHECKING

import click

from runner.errors import UsageError
from runner.exits import Exit

if TYPE_CHECKING:
    from collections.abc import Callable

    from runner.acceptance import Outcome, UnitResult

    Announce = Callable[[UnitResult, int, int], None]


@click.command("run")
@click.argument("spec", type=click.Path(path_type=Path))
@click.argument("frames", type=click.Path(path_type=Path))
@click.option("--out", required=True, type=click.Path(path_type=Path), help="Folder for the reports.")
@click.option("--unit", "units", multiple=True, metavar="SERIAL", help="Only this unit; may be given several times.")
@click.option("--lot", default="", metavar="ID", help="Lot that the units belong to.")
@click.option("--operator", default="", help="Who runs the test.")
@click.option("--station", type=click.Path(path_type=Path), help="Station file: instruments, declared uncertainty.")
@click.option("--time", metavar="T", help="Time of the verdicts, ISO 8601 with zone; default: now.")
@click.option(
    "--key", type=click.Path(path_type=Path), help="Signing key; default: a local key made for this computer."
)
@click.option("--passphrase-file", type=click.Path(path_type=Path), help="File with the key's pass phrase.")
@click.option("--timestamp", "timestamp_url", metavar="URL", help="RFC 3161 time-stamp server.")
@click.option("--jobs", default=1, type=click.IntRange(1), help="Processes.")
@click.option("--junit", type=click.Path(path_type=Path), help="Write JUnit XML here.")
@click.option("--summary", type=click.Path(path_type=Path), help="Write a Markdown summary here.")
@click.option(
    "--undecided",
    type=click.Choice(["failure", "skipped"]),
    default="failure",
    help="How `cannot decide` appears in the JUnit file.",
)
@click.option("--json-lines", is_flag=True, help="Print one JSON object per unit.")
@click.option("--quiet", is_flag=True, help="Print nothing but errors.")
def command(  # noqa: D103 - the help text stands below
    spec: Path,
    frames: Path,
    out: Path,
    units: tuple[str, ...],
    lot: str,
    operator: str,
    station: Path | None,
    time: str | None,
    key: Path | None,
    passphrase_file: Path | None,
    timestamp_url: str | None,
    jobs: int,
    junit: Path | None,
    summary: Path | None,
    undecided: str,
    json_lines: bool,
    quiet: bool,
) -> Exit:
    from runner import acceptance  # noqa: PLC0415 - heavy
    from runner.commands.passphrase import find_passphrase  # noqa: PLC0415

    order = acceptance.Order(
        spec=spec,
        frames=frames,
        out=out,
        units=units,
        lot=lot,
        operator=operator,
        station=station,
        time=time,
        key=key,
        passphrase=find_passphrase(passphrase_file) if key else None,
        timestamp_url=timestamp_url,
        jobs=jobs,
    )
    with _announcer(quiet=quiet, json_lines=json_lines) as announce:
        outcome = acceptance.run(order, announce)
    _write_tables(outcome, junit, summary, undecided)
    if not quiet and not json_lines:
        _tell(outcome, out)
    return outcome.exit


command.help = """Judge every unit found under FRAMES by SPEC; write reports to the folder of --out.

FRAMES holds one folder per unit, named by its serial, with that unit's frames inside or in attempt-N subfolders. With
one --unit it may hold the frames themselves.
"""


class _announcer:  # noqa: N801 - used like a function
    """Tells about each unit as it is done: a progress bar on a terminal, plain or JSON lines elsewhere."""

    def __init__(self, *, quiet: bool, json_lines: bool) -> None:
        self._quiet, self._json_lines = quiet, json_lines
        self._progress: object | None = None

    def __enter__(self) -> "Announce":
        if self._quiet:
            return lambda _result, _done, _all: None
        if self._json_lines:
            return _print_json
        if not sys.stdout.isatty():
            return lambda result, done, total: print(f"{done}/{total} {_line(result)}", flush=True)
        from rich.progress import Progress  # noqa: PLC0415 - only on a terminal

        progress = Progress(transient=True)
        progress.start()
        self._progress = progress
        task = progress.add_task("judging units", total=None)

        def announce(result: "UnitResult", done: int, total: int) -> None:
            progress.update(task, completed=done, total=total)
            progress.console.print(_line(result), markup=False, highlight=False, style=_STYLES.get(result.verdict))

        return announce

    def __exit__(self, *_: object) -> None:
        if self._progress is not None:
            self._progress.stop()  # type: ignore[attr-defined]


_STYLES = {
    "conforms": "green",
    "does not conform": "red",
    "cannot decide": "yellow",
    "not measured": "blue",
}
"""IEC 60073 colours; the word always stands there too."""


def _line(result: "UnitResult") -> str:
    fault = f" [{result.at_fault}]" if result.at_fault else ""
    why = f": {result.because}" if result.because and result.verdict != "conforms" else ""
    return f"{result.serial}  {result.verdict.upper()}{fault}{why}" + ("  (kept)" if result.kept else "")


def _print_json(result: "UnitResult", done: int, total: int) -> None:
    data = {
        "serial": result.serial,
        "verdict": result.verdict,
        "at_fault": result.at_fault,
        "because": result.because,
        "next": result.next,
        "exit": int(result.exit),
        "folder": str(result.folder),
        "kept": result.kept,
        "done": done,
        "of": total,
    }
    print(json.dumps(data, ensure_ascii=False), flush=True)


def _write_tables(outcome: "Outcome", junit: Path | None, summary: Path | None, undecided: str) -> None:
    if junit is None and summary is None:
        return
    from runner.report import store, tables  # noqa: PLC0415 - heavy

    told = ("document", "unit", "time", "verdict", "at_fault", "because", "reasons", "next", "checks")
    documents = [{key: document[key] for key in told} for document in outcome.documents()]
    try:
        if junit is not None:
            store.write_whole(junit, tables.junit_xml(documents, undecided=undecided))
        if summary is not None:
            store.write_whole(summary, tables.markdown_summary(outcome.lot, documents).encode())
    except OSError as error:
        where = str(error.filename or junit or summary)
        raise UsageError(f"it cannot be written: {error.strerror}", where=where) from error


def _tell(outcome: "Outcome", out: Path) -> None:
    counts: dict[str, int] = {}
    for unit in outcome.units:
        counts[unit.verdict] = counts.get(unit.verdict, 0) + 1
    words = ", ".join(f"{n} {verdict}" for verdict, n in counts.items()) or "no unit was found"
    number = len(outcome.units)
    print(f"\n{number} {'unit' if number == 1 else 'units'}: {words}")
    for name in outcome.unused:
        print(f"not used: {name}")
    if not number:
        print(
            "FRAMES holds one folder per unit, named by its serial; when the frames of one unit lie in FRAMES itself, "
            "name it with --unit SERIAL"
        )
    print(f"open first: {out / 'lot.html'}")
