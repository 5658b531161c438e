"""The audit takes nothing from what it judges."""

from __future__ import annotations

import ast
from pathlib import Path

import passplan.planning.audit

# Where an orbit crosses the equator is no choice of the planner's.
ALLOWED = (
    "passplan.inputs", "passplan.planning.audit", "passplan.link.budget", "passplan.link.atmosphere",
    "passplan.geometry.revolutions",
)


def test_imports() -> None:
    folder = Path(passplan.planning.audit.__file__).parent
    seen = set()
    for file in folder.glob("*.py"):
        for node in ast.walk(ast.parse(file.read_text(encoding="utf-8"))):
            if isinstance(node, ast.ImportFrom) and node.module:
                seen.add(node.module)
            elif isinstance(node, ast.Import):
                seen.update(alias.name for alias in node.names)
    own = {name for name in seen if name.startswith("passplan")}
    assert own
    assert [name for name in sorted(own) if not name.startswith(ALLOWED)] == []
