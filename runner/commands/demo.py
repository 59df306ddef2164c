"""`probatum demo`: make the frames of invented lots, run the job on them, compare with what is documented."""

import sys
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

import click

from runner.errors import UsageError
from runner.exits import Exit
from runner.resources import folder

if TYPE_CHECKING:
    from runner.acceptance import Outcome
    from runner.rehearse.expected import Documented, Expected

SCENARIO, EXPECTED = "scenario.yaml", "expected.yaml"


@click.command("demo")
@click.argument("lot", required=False)
@click.option(
    "--out",
    default="probatum-demo",
    show_default=True,
    type=click.Path(path_type=Path),
    help="Folder for frames and reports; without LOT, one folder in it per lot.",
)
@click.option("--jobs", default=1, show_default=True, type=click.IntRange(1), help="Processes.")
def command(lot: str | None, out: Path, jobs: int) -> Exit:
    """Make the frames of an invented LOT, judge them, and compare each verdict with the documented one.

    Without LOT, of every lot there is. Some units are meant to fail. Exit code 0: every unit got its documented verdict
    and blame; else 70.
    """
    homes = {out: _lot_folder(lot)} if lot else {out / name: home for name, home in _lots().items()}
    ends = [_run_lot(home, place, jobs) for place, home in homes.items()]
    print("\n\n".join(told for _, told in ends))
    return Exit.CONFORMS if all(agreed for agreed, _ in ends) else Exit.FAULT


def _run_lot(home: Path, out: Path, jobs: int) -> tuple[bool, str]:
    """Return whether every unit of a lot ended as documented, and what to open."""
    from runner import acceptance  # noqa: PLC0415 - heavy
    from runner.rehearse.expected import found_in, read_expected  # noqa: PLC0415 - heavy
    from runner.rehearse.lot import make_lot  # noqa: PLC0415 - heavy
    from runner.rehearse.scenario import read_scenario  # noqa: PLC0415 - heavy

    scenario, expected = read_scenario(home / SCENARIO), read_expected(home / EXPECTED)
    frames, reports = out / "frames", out / "reports"
    print(f"{scenario.title} (invented, simulated)", flush=True)
    with _progress("making frames of") as told:
        make_lot(scenario, frames, jobs=jobs, announce=told)
    order = acceptance.Order(spec=home / expected.spec, frames=frames, out=reports, lot=f"demo {home.name}", jobs=jobs)
    with _progress("judging") as told:
        outcome = acceptance.run(order, lambda result, done, total: told(result.serial, done, total))
    found = {document["unit"]["serial"]: found_in(document) for document in outcome.documents()}
    agreed = _tell(expected, found, {serial: unit.story for serial, unit in scenario.units.items()})
    return agreed, f"{scenario.title}\n{_pointers(outcome, expected, out, home)}"


def _lots() -> Mapping[str, Path]:
    """Return the folders of all lots by their names."""
    found = {place.parent.name: place.parent for place in folder("demo_lots").glob(f"*/{SCENARIO}")}
    return dict(sorted(found.items()))


def _lot_folder(lot: str) -> Path:
    lots = _lots()
    if lot not in lots:
        raise UsageError(f"there is no demo lot '{lot}'", where="LOT", allowed=f"lots: {', '.join(lots)}")
    return lots[lot]


@contextmanager
def _progress(doing: str) -> Iterator[Callable[[str, int, int], None]]:
    """Tell how far the work is: a bar on a terminal, plain lines elsewhere."""
    if not sys.stdout.isatty():
        yield lambda serial, done, total: print(f"{done}/{total} {doing} {serial}", flush=True)
        return
    from rich.progress import Progress  # noqa: PLC0415 - only on a terminal

    with Progress(transient=True) as bar:
        task = bar.add_task(doing, total=None)
        yield lambda serial, done, total: bar.update(task, completed=done, total=total, description=f"{doing} {serial}")


def _tell(expected: "Expected", found: Mapping[str, "Documented"], stories: Mapping[str, str]) -> bool:
    """Print the table; return whether every unit ended as documented."""
    serials = sorted({*expected.units, *found, *stories})
    print(f"\n{'serial':<12}{'verdict':<18}{'at fault':<13}{'documented':<12}what is the matter with it")
    for serial in serials:
        got, documented = found.get(serial), expected.units.get(serial)
        verdict, fault = (got.verdict, got.at_fault or "-") if got else ("no report", "-")
        agrees = "as it is" if got is not None and got == documented else "DIFFERS"
        print(f"{serial:<12}{verdict:<18}{fault:<13}{agrees:<12}{stories.get(serial, '-')}")
    differing = [serial for serial in serials if found.get(serial) != expected.units.get(serial)]
    for serial in differing:
        print(f"\n{serial} differs: documented: {expected.units.get(serial)}; found: {found.get(serial)}")
    if not differing:
        print(f"\nAll {len(serials)} units ended as documented; some are meant to fail.")
    print(flush=True)
    return not differing


def _pointers(outcome: "Outcome", expected: "Expected", out: Path, home: Path) -> str:
    """Return where everything lies and what to open first."""
    reports = out / "reports"
    first = next((u.folder for u in outcome.units if u.serial == expected.open_first), reports)
    return "\n".join(
        [
            f"open first:  {first / 'report.html'}  (one unit that fails; report.pdf beside it is the signed one)",
            f"then:        {reports / 'lot.html'}  (the lot at a glance)",
            f"test spec:   {home / expected.spec}",
            f"frames:      {out / 'frames'}",
            f"check them:  probatum verify {reports}",
        ]
    )
