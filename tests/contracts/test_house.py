"""Rules of the house: the source root, the layers, what a bare import loads, no floating point where it decides."""

import ast
import os
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
PACKAGES = {"solverkit": ROOT / "solverkit", "cycle_encodings": ROOT / "encodings" / "cycle_encodings"}

# Room -> rooms it may import. Base modules may import only base modules.
BASE = {"errors", "maps", "words", "numerals", "window", "window_file", "findings", "methods", "registry", "__init__",
        "shape", "shape_words", "shape_pattern", "shape_residues", "shape_consistency", "__main__"}  # fmt: skip
MAY = {
    "exact": {"exact"},
    "residues": {"exact", "residues"},
    "engines": {"exact", "residues", "engines"},
    "cycle_encodings": {"exact", "residues", "cycle_encodings"},
    "solvers": {"exact", "residues", "engines", "cycle_encodings", "solvers"},
    "ledger": {"ledger"},
    "settle": {"exact", "residues", "engines", "cycle_encodings", "solvers", "ledger", "settle"},
    "exports": {"exact", "residues", "cycle_encodings", "exports"},
    "trials": {"exact", "residues", "engines", "cycle_encodings", "solvers", "settle", "exports", "trials"},
    "explain": {"exact", "cycle_encodings", "solvers", "explain"},
    "cli": {"exact", "settle", "ledger", "cycle_encodings", "solvers", "exports", "trials", "explain", "cli"},
}


def _sources():
    for package, folder in PACKAGES.items():
        for path in sorted(folder.rglob("*.py")):
            yield package, path


def _room(module):
    parts = module.split(".")
    if parts[0] == "cycle_encodings":
        return "cycle_encodings"
    return "" if len(parts) == 1 or parts[1] in BASE else parts[1]


def _imports(path):
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and node.module:
            yield node.module


def test_source_root_is_no_package():
    """Python's own library owns the import name `encodings`."""
    assert not (ROOT / "encodings" / "__init__.py").exists()


def test_python_starts_with_the_project_on_its_path():
    run = subprocess.run(
        [sys.executable, "-c", "import encodings.utf_8, solverkit; print(encodings.__file__)"],
        cwd=ROOT, env={**os.environ, "PYTHONPATH": "."}, capture_output=True, text=True, check=True,
    )  # fmt: skip
    assert str(ROOT) not in run.stdout


@pytest.mark.parametrize(("package", "path"), list(_sources()), ids=lambda value: getattr(value, "stem", value))
def test_arrows_between_rooms_go_one_way(package, path):
    relative = path.relative_to(PACKAGES[package])
    own = _room(".".join([package, *relative.with_suffix("").parts]))
    for module in _imports(path):
        if module.split(".")[0] in PACKAGES:
            target = _room(module)
            if own:
                assert target in {"", *MAY[own]}, f"{relative} imports {module}"
            elif path.stem != "__main__":
                assert not target, f"{relative} imports {module}"


def test_networkx_lives_in_residues_only():
    users = {path.parent.name for _, path in _sources() if any(m.split(".")[0] == "networkx" for m in _imports(path))}
    assert users == {"residues"}


def test_exact_contains_no_float():
    for path in sorted((ROOT / "solverkit" / "exact").glob("*.py")):
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            assert not (isinstance(node, ast.Constant) and isinstance(node.value, float)), f"{path.name}:{node.lineno}"
            assert not (isinstance(node, ast.Name) and node.id == "float"), f"{path.name}:{node.lineno}"


@pytest.mark.parametrize(
    ("statement", "unwanted"),
    [
        ("import solverkit", {"numba", "networkx", "pysat", "matplotlib", "flint", "numpy", "rich"}),
        (
            "from solverkit.cli.commands import application; application()",
            {"numba", "networkx", "pysat", "numpy", "matplotlib"},
        ),
        ("import solverkit.settle.run", {"numba", "networkx", "pysat", "numpy", "matplotlib"}),
    ],
)
def test_heavy_libraries_load_only_when_used(statement, unwanted):
    run = subprocess.run(
        [sys.executable, "-c", f"{statement}\nimport sys; print(*sorted(m.split('.')[0] for m in sys.modules))"],
        cwd=ROOT, env={**os.environ, "PYTHONPATH": f".{os.pathsep}encodings"},
        capture_output=True, text=True, check=True,
    )  # fmt: skip
    assert not unwanted & set(run.stdout.split())


def test_both_packages_are_shipped_and_typed():
    config = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
    wheel = config["tool"]["hatch"]["build"]["targets"]["wheel"]
    assert wheel["packages"] == ["solverkit", "encodings/cycle_encodings"]
    assert all((folder / "py.typed").exists() for folder in PACKAGES.values())


@pytest.mark.parametrize(("package", "path"), list(_sources()), ids=lambda value: getattr(value, "stem", value))
def test_modules_stay_short(package, path):
    """Over 500 lines means two ideas."""
    assert len(path.read_text(encoding="utf-8").splitlines()) <= 500
