"""The house rules that a machine can check: layers, sizes, twins, docstrings, words."""

import ast
import re
from itertools import chain
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
RUNNER = ROOT / "runner"
LAYERS = ("spec", "capture", "measure", "judge", "report")
MODULES = sorted(p for p in RUNNER.rglob("*.py") if "data" not in p.relative_to(RUNNER).parts)
TESTS = sorted((ROOT / "tests").rglob("test_*.py"))


def _layer(module: Path) -> str:
    return module.relative_to(RUNNER).parts[0]


def _imports(module: Path) -> list[str]:
    tree = ast.parse(module.read_text(encoding="utf-8"))
    names = [[a.name for a in n.names] for n in ast.walk(tree) if isinstance(n, ast.Import)]
    names += [[f"{n.module}.{a.name}" for a in n.names] for n in ast.walk(tree) if isinstance(n, ast.ImportFrom)]
    return list(chain.from_iterable(names))


@pytest.mark.parametrize(
    "module", [m for m in MODULES if _layer(m) in LAYERS], ids=lambda m: str(m.relative_to(RUNNER))
)
def test_no_stage_imports_from_a_later_one(module: Path) -> None:
    """A layer imports only from layers to its left and from errors, exits, resources and the version."""
    allowed = {f"runner.{name}" for name in LAYERS[: LAYERS.index(_layer(module)) + 1]}
    allowed |= {"runner.errors", "runner.exits", "runner.resources", "runner.__version__"}

    own = [name for name in _imports(module) if name.split(".")[0] == "runner" and name != "runner"]
    wrong = [name for name in own if ".".join(name.split(".")[:2]) not in allowed]

    # verify measures again: the one way back from a report to the whole run, taken when it is called
    assert [name for name in wrong if not name.startswith("runner.acceptance") or "verify" not in module.name] == []


@pytest.mark.parametrize("module", MODULES, ids=lambda m: str(m.relative_to(RUNNER)))
def test_files_and_functions_stay_small(module: Path) -> None:
    """A file stays under 400 lines, a function under 60 without its docstring, a class under 100 unless a record."""
    text = module.read_text(encoding="utf-8")
    tree = ast.parse(text)

    assert len(text.splitlines()) <= 400
    for node in ast.walk(tree):
        if isinstance(node, (ast.FunctionDef, ast.AsyncFunctionDef)):
            first = node.body[0]
            doc = ast.get_docstring(node) is not None and isinstance(first, ast.Expr)
            start = (first.end_lineno or 0) + 1 if doc else node.lineno
            assert (node.end_lineno or 0) - start <= 60, node.name
        if isinstance(node, ast.ClassDef) and not any("dataclass" in ast.dump(d) for d in node.decorator_list):
            record = any(isinstance(b, ast.Name) and b.id in {"BaseModel", "Shape", "Protocol"} for b in node.bases)
            assert record or (node.end_lineno or 0) - node.lineno <= 100, node.name


@pytest.mark.parametrize(
    "module",
    [m for m in MODULES if m.name not in {"__init__.py", "__main__.py"}],
    ids=lambda m: str(m.relative_to(RUNNER)),
)
def test_every_module_has_its_twin(module: Path) -> None:
    """Every module has a test file of its own name."""
    assert any(test.name == f"test_{module.stem}.py" for test in TESTS)


@pytest.mark.parametrize("test", TESTS, ids=lambda t: str(t.relative_to(ROOT)))
def test_every_test_states_its_rule(test: Path) -> None:
    """Every test has a docstring, and every `raises` says what it matches."""
    tree = ast.parse(test.read_text(encoding="utf-8"))

    for node in ast.walk(tree):
        if isinstance(node, ast.FunctionDef) and node.name.startswith("test_"):
            assert ast.get_docstring(node), f"{test.name}: {node.name}"
        if isinstance(node, ast.Call) and ast.unparse(node.func) == "pytest.raises":
            assert any(k.arg == "match" for k in node.keywords), f"{test.name}:{node.lineno}"


@pytest.mark.parametrize("shelf", ["targets", "methods"])
def test_every_module_on_a_shelf_names_its_sources(shelf: str) -> None:
    """Every target and method says which standard or publication it follows."""
    for module in sorted((RUNNER / "measure" / shelf).glob("[!_]*.py")):
        assert re.search(r"^REFERENCES = \(\n?\s*[\"']", module.read_text(encoding="utf-8"), re.MULTILINE), module.name


def test_the_top_level_is_fixed() -> None:
    """Nothing but the fixed names and dot-files lies at the top."""
    fixed = {"README.md", "DEVELOPERS.md", "pyproject.toml", "runner", "specs", "templates", "tests", "demo_lots"}
    built = {"dist", "build"}

    assert {p.name for p in ROOT.iterdir() if not p.name.startswith(".")} - built <= fixed


@pytest.mark.parametrize("module", MODULES, ids=lambda m: str(m.relative_to(RUNNER)))
def test_every_field_of_a_record_has_its_sentence(module: Path) -> None:
    """Records are frozen, and each field is followed by its sentence or carries it as metadata."""
    tree = ast.parse(module.read_text(encoding="utf-8"))

    for node in ast.walk(tree):
        if not isinstance(node, ast.ClassDef):
            continue
        marks = [ast.unparse(d) for d in node.decorator_list if "dataclass" in ast.unparse(d)]
        if not marks:
            continue
        mutable = {"Faults"}  # collects tracebacks while a unit is measured
        assert "frozen=True" in marks[0] or node.name in mutable, node.name
        for field, after in zip(node.body, [*node.body[1:], None], strict=True):
            if isinstance(field, ast.AnnAssign) and not ast.unparse(field.target).startswith("_"):
                told = isinstance(after, ast.Expr) and isinstance(after.value, ast.Constant)
                assert told or "sentence" in ast.unparse(field), f"{node.name}.{ast.unparse(field.target)}"
