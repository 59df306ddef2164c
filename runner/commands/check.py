"""`probatum check`: read specs and list every complaint; show the regions on a frame."""

from pathlib import Path
from typing import TYPE_CHECKING

import click

from runner.errors import Complaint, SpecError, UsageError
from runner.exits import Exit

if TYPE_CHECKING:
    from runner.measure.plan import Plan
    from runner.spec.model import Spec, Station


@click.command("check")
@click.argument("specs", metavar="SPEC...", nargs=-1, required=True, type=click.Path(path_type=Path))
@click.option("--station", type=click.Path(path_type=Path), help="Station file: its declared uncertainty counts too.")
@click.option("--frames", type=click.Path(path_type=Path), help="Folder with units, or with frames; needs --out.")
@click.option("--out", type=click.Path(path_type=Path), help="Page that shows the regions on the frames (HTML).")
@click.option("--expanded", is_flag=True, help="Print the expanded form, of which the digest is, as canonical JSON.")
def command(
    specs: tuple[Path, ...], station: Path | None, frames: Path | None, out: Path | None, expanded: bool
) -> Exit:
    """Read each SPEC and list every complaint with line and column; no verdict.

    Exit code 0: every spec can be used, perhaps with warnings; 2: one cannot.
    """
    if (frames is None) != (out is None):
        raise UsageError("--frames and --out belong together", next_step="give both or neither")
    if frames is not None and len(specs) != 1:
        raise UsageError("--frames shows one spec at a time", next_step="name one SPEC")
    from runner.spec.station import read_station  # noqa: PLC0415 - heavy

    place = read_station(station) if station is not None else None
    plans = [_check(path, place, expanded=expanded) for path in specs]
    if any(plan is None for plan in plans):
        return Exit.USAGE
    if frames is not None and out is not None and plans[0] is not None:
        from runner.commands.regions_page import write_page  # noqa: PLC0415 - heavy

        print(write_page(plans[0], frames, out))
    return Exit.CONFORMS


def _check(path: Path, station: "Station | None", *, expanded: bool) -> "Plan | None":
    """Print one spec's complaints and its line; return its plan if it can be used."""
    from runner.measure.plan import bind  # noqa: PLC0415 - heavy
    from runner.spec.build import read_spec  # noqa: PLC0415 - heavy
    from runner.spec.revision import canonical_json  # noqa: PLC0415 - heavy

    try:
        spec = read_spec(path, station.uncertainty if station is not None else ())
    except SpecError as error:
        _refused(path, error.complaints)
        return None
    try:
        plan = bind(spec, station)
    except SpecError as error:
        _refused(path, (*spec.warnings, *error.complaints))
        return None
    print("\n".join([*(str(warning) for warning in plan.spec.warnings), _summary(path, plan.spec)]))
    if expanded:
        print(canonical_json(spec.expanded).decode("utf-8"))
    return plan


def _refused(path: Path, complaints: tuple[Complaint, ...]) -> None:
    errors = sum(complaint.severity == "error" for complaint in complaints)
    print("\n".join(str(complaint) for complaint in complaints))
    print(f"{path.as_posix()}: cannot be used, {_count(errors, 'complaint')}")


def _summary(path: Path, spec: "Spec") -> str:
    limits = sum(len(capture.limits) for capture in spec.captures)
    parts = [
        f"{path.as_posix()}: {spec.document.number} revision {spec.document.revision}",
        _count(len(spec.captures), "capture"),
        _count(limits, "limit"),
        _count(len(spec.warnings), "warning"),
        spec.digest,
    ]
    return ", ".join(parts)


def _count(number: int, thing: str) -> str:
    return f"{number} {thing}" + ("" if number == 1 else "s")
