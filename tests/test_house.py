"""The house: which way the arrows run, and that the core stays free of screens and files."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
# Folder → what of the house it may import. cli, as_json and as_text stand with the screens.
MAY = {"solver": {"solver"}, "blendtui/store": {"solver", "blendtui.store"},
       "blendtui/desk": {"solver", "blendtui.store", "blendtui.desk"}}


def loaded(code: str) -> set[str]:
    """Top-level modules in a fresh process after some code."""
    out = subprocess.run([sys.executable, "-c", f"{code}\nimport sys\nprint(*sys.modules)"], capture_output=True,
                         text=True, check=True, cwd=ROOT)
    return {name.partition(".")[0] for name in out.stdout.split()}


def test_the_solver_loads_no_screen_table_or_database() -> None:
    names = " ".join(f"import solver.{path.stem};" for path in sorted((ROOT / "solver").glob("[a-z]*.py")))
    found = loaded(names)
    assert "scipy" in found
    assert not found & {"textual", "rich", "pandas", "sqlite3", "blendtui"}


def test_the_console_starts_without_the_slow_libraries() -> None:
    assert not loaded("import blendtui.app") & {"scipy", "pandas"}
    assert not loaded("import blendtui.cli") & {"scipy", "pandas", "textual", "numpy.linalg"} - {"numpy.linalg"}


@pytest.mark.parametrize("folder", MAY)
def test_arrows_run_one_way(folder: str) -> None:
    for path in (ROOT / folder).rglob("*.py"):
        package = ".".join(path.relative_to(ROOT).parent.parts)
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            names = [a.name for a in node.names] if isinstance(node, ast.Import) else []
            if isinstance(node, ast.ImportFrom):
                base = package.split(".")[:len(package.split(".")) - node.level + 1] if node.level else []
                names = [".".join([*base, *([node.module] if node.module else [])])]
            for name in names:
                ours = name.split(".")[0] in ("solver", "blendtui") and name != "blendtui"
                assert not ours or any(name == m or name.startswith(m + ".") for m in MAY[folder]), f"{path}: {name}"


def test_sql_lives_in_the_store() -> None:
    for path in (ROOT / "blendtui").rglob("*.py"):
        if "store" not in path.parts:
            assert "sqlite3" not in path.read_text(encoding="utf-8"), path


def test_modules_stay_readable() -> None:
    for folder in ("solver", "blendtui"):
        for path in (ROOT / folder).rglob("*.py"):
            assert len(path.read_text(encoding="utf-8").splitlines()) <= 420, path
