"""The way of the imports: flows -> process -> the rooms -> what they all stand on; never back."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
# In the order in which a module may import those before it.
LAYERS = (
    ("variable",),
    ("crossover_variables", "carbon_variables", "isotope_variables", "census_variables"),
    ("variables", "problems", "findings", "version"),
    ("toml_text", "tables", "units", "limits"),
    ("crossover_settings", "carbonate_settings", "carbon_tracer_settings", "census_settings"),
    ("settings",),
    ("usable", "corrections"),
    ("working",),
    ("reading",),  # the rooms: none imports a later one
    ("seawater",),
    ("checking",),
    ("tracers",),
    ("mixing",),
    ("crossovers",),
    ("archive",),
    ("reporting",),
    ("census",),
    ("opening", "exporting", "dictionary"),
    ("process",),
    ("large_cruise",),
)
LEVEL = {name: level for level, names in enumerate(LAYERS) for name in names}


def test_importing_the_library_never_loads_prefect() -> None:
    modules = [f"pipeline.{name}" for name in LEVEL]
    code = f"import pipeline, sys, importlib\nfor m in {modules}: importlib.import_module(m)\n"
    code += "assert not [m for m in sys.modules if m.split('.')[0] in ('prefect', 'flows')]"
    subprocess.run([sys.executable, "-c", code], check=True, cwd=ROOT)


@pytest.mark.parametrize("path", sorted((ROOT / "pipeline").rglob("*.py")), ids=lambda path: path.stem)
def test_imports_go_one_way(path: Path) -> None:
    own = path.relative_to(ROOT / "pipeline").parts[0].removesuffix(".py")
    for imported in _imports(path):
        parts = imported.split(".")
        assert parts[0] not in {"flows", "prefect", "tests", "fixtures"}, imported
        if parts[0] != "pipeline" or len(parts) == 1 or own in {"__init__", parts[1]}:
            continue
        assert LEVEL[parts[1]] < LEVEL[own], f"{own} imports {imported}"


@pytest.mark.parametrize("folder", ["pipeline", "flows", "tests", "fixtures"])
def test_files_are_short(folder: str) -> None:
    long = {
        str(path): count
        for path in (ROOT / folder).rglob("*.py")
        if (count := len(path.read_text(encoding="utf-8").splitlines())) > 400
    }
    assert not long


def _imports(path: Path) -> set[str]:
    found = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and node.module:
            found |= {f"{node.module}.{alias.name}" for alias in node.names} | {node.module}
    return found
