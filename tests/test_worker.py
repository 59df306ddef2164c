"""What workers load before they are forked: everything that a unit needs, and no failure of its own."""

import os
import subprocess
import sys
from pathlib import Path

from runner import worker

ROOT = Path(__file__).resolve().parent.parent


def _python(code: str) -> set[str]:
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", code],
        env=os.environ | {"PYTHONPATH": str(ROOT)},
        capture_output=True,
        text=True,
        check=True,
        timeout=120,
    )
    return set(done.stdout.split())


def test_a_unit_loads_nothing_heavy_any_more(tmp_path: Path) -> None:
    """After the loading, printing and signing a report imports no other library that takes long."""
    code = (
        "import sys; from runner import worker; before = set(sys.modules)\n"
        "from datetime import UTC, datetime; from pathlib import Path\n"
        "from runner.report.keys import local_station_key; from runner.report.unit_files import unit_files\n"
        "from tests.report import printed_world as world\n"
        f"unit_files(world.document(), world.pictures(), local_station_key(Path({str(tmp_path / 'key')!r})), [])\n"
        "heavy = ('numpy', 'scipy', 'weasyprint', 'pyhanko', 'cryptography', 'pydantic', 'fontTools', 'jinja2')\n"
        "packages = lambda names: {name.split('.')[0] for name in names}\n"
        "print(*packages(sys.modules) - packages(before) & {*heavy})"
    )

    assert _python(code) == set()


def test_a_library_that_fails_to_load_stops_nothing_yet() -> None:
    """The failure comes where the library is needed, in the words of that place."""
    assert _python("import sys; sys.modules['weasyprint'] = None\nfrom runner import worker; print('on')") == {"on"}
    assert "runner.acceptance" in worker.NEEDED
