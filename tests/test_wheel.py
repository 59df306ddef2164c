"""The wheel: built from the sources, installed elsewhere, run from an unrelated folder, whole and nothing besides."""

import os
import shutil
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest
import yaml

import runner

ROOT = Path(__file__).resolve().parent.parent
DATA = ("templates", "specs", "demo_lots")
UNIT = "WS8-000101"
"""A unit of the demo lot that conforms."""
FRAMES = f"""
from pathlib import Path
from runner.rehearse.lot import make_unit
from runner.rehearse.scenario import read_scenario
from runner.resources import folder
scenario = read_scenario(folder("demo_lots") / "walnut_line" / "scenario.yaml")
make_unit(scenario, scenario.units["{UNIT}"], Path("frames"))
print(folder("demo_lots"))
"""


def _files(folder: Path) -> set[str]:
    """Return the files below a folder that belong to the sources."""
    built = {"__pycache__", "out"}
    found = (path for path in folder.rglob("*") if path.is_file())
    return {path.relative_to(folder).as_posix() for path in found if not built & set(path.relative_to(folder).parts)}


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Build the wheel from a copy of the sources in which the demo has left its output, as at everyone's desk."""
    place = tmp_path_factory.mktemp("wheel")
    for name in ("runner", *DATA):
        shutil.copytree(ROOT / name, place / name, ignore=shutil.ignore_patterns("__pycache__", "out"))
    for name in ("pyproject.toml", "README.md", ".gitignore"):
        shutil.copy(ROOT / name, place)
    (place / "demo_lots" / "out" / "frames").mkdir(parents=True)
    (place / "demo_lots" / "out" / "frames" / "chart-1.tif").write_bytes(bytes(1000))
    code = "import hatchling.build as builder; builder.build_wheel('dist')"
    subprocess.run([sys.executable, "-c", code], cwd=place, check=True, stdout=subprocess.DEVNULL, timeout=60)
    (made,) = (place / "dist").glob("*.whl")
    return made


@pytest.fixture(scope="module")
def installed(wheel: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Install the wheel without its libraries into a fresh folder; they are those of the present Python."""
    place = tmp_path_factory.mktemp("installed")
    command = [sys.executable, "-m", "pip", "install", "--quiet", "--disable-pip-version-check", "--no-deps"]
    subprocess.run([*command, "--no-index", "--target", str(place), str(wheel)], check=True, timeout=120)
    return place


def _call(installed: Path, folder: Path, *words: str | Path, code: int = 0) -> str:
    """Call the installed program, or Python with `-c`, from a folder; return what it prints."""
    environment = {name: value for name, value in os.environ.items() if name != "PYTHONPATH"}
    environment |= {"PYTHONPATH": str(installed), "XDG_CONFIG_HOME": str(folder / "config")}
    command = [sys.executable] if words[0] == "-c" else [sys.executable, str(installed / "bin" / "probatum")]
    done = subprocess.run(
        [*command, *words], cwd=folder, env=environment, capture_output=True, text=True, check=False, timeout=120
    )
    assert done.returncode == code, done.stdout + done.stderr
    assert done.stderr == ""
    return done.stdout


def test_it_holds_the_program_and_its_data_and_nothing_else(wheel: Path) -> None:
    """Every module, template, font, ready spec and demo lot is in it; no test, no output, no path of this machine."""
    with zipfile.ZipFile(wheel) as archive:
        names = {name for name in archive.namelist() if not name.endswith("/")}
        contents = b"".join(archive.read(name) for name in names)
    about = {name for name in names if name.startswith(f"probatum-{runner.__version__}.dist-info/")}
    wanted = {f"runner/{name}" for name in _files(ROOT / "runner")}
    wanted |= {f"runner/data/{folder}/{name}" for folder in DATA for name in _files(ROOT / folder)}

    assert names - about == wanted
    assert "runner/data/templates/fonts/DejaVuSans.ttf" in names
    assert {Path(name).name for name in about} >= {"METADATA", "RECORD", "entry_points.txt"}
    assert str(ROOT).encode() not in contents
    assert wheel.stat().st_size < 5_000_000


def test_it_answers_from_anywhere(installed: Path, tmp_path: Path) -> None:
    """Version, targets and a check of every ready spec, by the installed program and not by the sources."""
    place = _call(installed, tmp_path, "-c", "import runner; print(runner.__file__)")

    assert Path(place.strip()) == installed / "runner" / "__init__.py"
    assert _call(installed, tmp_path, "--version") == f"probatum, version {runner.__version__}\n"
    assert "slanted edge" in _call(installed, tmp_path, "targets")
    specs = sorted((installed / "runner" / "data").rglob("*/*.yaml"))
    specs = [path for path in specs if "probatum-spec" in yaml.safe_load(path.read_text(encoding="utf-8"))]
    assert len(specs) >= 2
    told = _call(installed, tmp_path, "check", *specs)
    assert told.count("sha256:") == len(specs)


def test_it_judges_a_unit_and_verifies_its_report(installed: Path, tmp_path: Path) -> None:
    """Rehearsed frames of the demo's first unit are judged; the signed report holds, by a key that is only local."""
    demo = Path(_call(installed, tmp_path, "-c", FRAMES).strip()) / "walnut_line"
    assert demo.is_relative_to(installed)

    told = _call(installed, tmp_path, "run", demo / "walnut-board-camera.yaml", "frames", "--out", "reports")
    assert f"{UNIT}  CONFORMS" in told
    report = tmp_path / "reports" / UNIT / "report.pdf"
    (tmp_path / "changed.pdf").write_bytes(report.read_bytes().replace(b"/CreationDate", b"/CreationDatE", 1))
    told = _call(installed, tmp_path, "verify", report, "changed.pdf", "--frames", "frames", code=1)
    first, second = told.split("changed.pdf: ")

    assert "report.pdf: sound, but not all of it is vouched for" in first
    assert "holds    PDF page: the page printed again from the data is the same byte for byte" in first
    assert "holds    values: every reading comes out again" in first
    assert "REFUSED" not in first
    assert second.startswith("REFUSED")
