"""The arrows between the layers point one way."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

import ladderband

PACKAGE = Path(ladderband.__file__).parent
OUTER = {"flask", "werkzeug", "marshmallow", "apispec", "gunicorn", "prometheus_client"}
ABOVE = {
    "numerics": {"usecases", "schemas", "formats", "jobs", "web", "cli", "settings"},
    "usecases": {"schemas", "formats", "jobs", "web", "cli", "settings"},
}


def imported_names(path: Path) -> set[str]:
    nodes = list(ast.walk(ast.parse(path.read_text())))
    names = {alias.name for node in nodes if isinstance(node, ast.Import) for alias in node.names}
    return names | {node.module or "" for node in nodes if isinstance(node, ast.ImportFrom)}


@pytest.mark.parametrize("layer", sorted(ABOVE))
def test_inner_layers_know_nothing_of_the_outer_ones(layer: str) -> None:
    files = sorted((PACKAGE / layer).rglob("*.py"))
    assert files
    for path in files:
        parts = {part for name in imported_names(path) for part in name.split(".")}
        assert not parts & OUTER, path
        assert not parts & ABOVE[layer], path


def test_no_process_global_precision_is_touched() -> None:
    """mpmath.mp and workdps belong to the process; python-flint's context lives in one module."""
    for path in sorted(PACKAGE.rglob("*.py")):
        text = path.read_text()
        assert "mpmath.mp." not in text, path
        assert "workdps" not in text, path
        assert "flint.ctx" not in text or path.name == "balls.py", path
