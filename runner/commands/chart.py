"""`probatum chart`: read chart files and list complaints; draw their artwork."""

from pathlib import Path

import click

from runner.errors import SpecError, UsageError
from runner.exits import Exit


@click.group("chart")
def command() -> None:
    """Work on chart files, which describe physical charts."""


@command.command("check")
@click.argument("files", metavar="FILE...", nargs=-1, required=True, type=click.Path(path_type=Path))
def check(files: tuple[Path, ...]) -> Exit:
    """Read each FILE and list every complaint with line and column; tell charts that can be taken for each other.

    Exit code 0: every chart can be used, perhaps with warnings; 2: one cannot.
    """
    from runner.report.chart_artwork import artwork_svg  # noqa: PLC0415 - heavy
    from runner.report.chart_pieces import without_artwork  # noqa: PLC0415
    from runner.spec.chart_arrangement import taken_for  # noqa: PLC0415
    from runner.spec.charts import read_chart  # noqa: PLC0415

    good = {}
    for path in files:
        try:
            chart = good[path.as_posix()] = read_chart(path)
        except SpecError as error:
            print("\n".join(str(complaint) for complaint in error.complaints))
            print(f"{path.as_posix()}: cannot be used")
            continue
        try:
            artwork_svg(chart)
        except UsageError as error:
            print(f"{path.as_posix()}: warning: it cannot be drawn: {error}")
        undrawn = without_artwork(chart)
        if undrawn:
            print(f"{path.as_posix()}: warning: there is no artwork for {', '.join(undrawn)}; their boxes stay empty")
        count = f"{len(chart.marks.at)} marks, {len(chart.features)} features"
        print(f"{path.as_posix()}: {chart.name}, serial {chart.serial}, {count}, {chart.digest}")
    names = list(good)
    for n, one in enumerate(names):
        for other in names[n + 1 :]:
            first, second = good[one], good[other]
            alike = taken_for(first.marks.at, second.marks.at, max(first.marks.diameter, second.marks.diameter))
            if alike and first.name != second.name:
                print(f"{one}: warning: it can be taken for {other}: {alike}; move some marks")
    return Exit.CONFORMS if len(good) == len({f.as_posix() for f in files}) else Exit.USAGE


@command.command("draw")
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--out", required=True, type=click.Path(path_type=Path), help="Artwork: a .pdf or .svg file.")
def draw(file: Path, out: Path) -> Exit:
    """Draw the chart of FILE 1:1, with a bar to check the print by."""
    from runner.report.chart_artwork import artwork  # noqa: PLC0415 - heavy
    from runner.report.chart_pieces import without_artwork  # noqa: PLC0415
    from runner.spec.charts import read_chart  # noqa: PLC0415

    chart = read_chart(file)
    data = artwork(chart, out.suffix)
    try:
        out.parent.mkdir(parents=True, exist_ok=True)
        out.write_bytes(data)
    except OSError as error:
        raise UsageError(f"the artwork cannot be written: {error.strerror}", where=str(out)) from error
    empty = without_artwork(chart)
    note = f"; no artwork for {', '.join(empty)}" if empty else ""
    print(f"{out.as_posix()}: {chart.name}, {chart.size[0]:g} mm × {chart.size[1]:g} mm{note}")
    return Exit.CONFORMS
