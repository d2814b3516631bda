"""Imports point one way: errors <- physics <- catalog <- selection <- web."""

import ast
from pathlib import Path

import pytest

SERVER = Path(__file__).parents[1] / "server"
ORDER = ["errors", "physics", "catalog", "selection", "web"]
MODULES = [p for room in ORDER[1:] for p in (SERVER / room).glob("*.py")] + [SERVER / "errors.py"]


@pytest.mark.parametrize("path", MODULES, ids=lambda p: str(p.relative_to(SERVER)))
def test_a_room_uses_only_rooms_to_its_left(path):
    room = path.stem if path.parent == SERVER else path.parent.name
    for node in ast.walk(ast.parse(path.read_text())):
        names = [node.module] if isinstance(node, ast.ImportFrom) else []
        names += [alias.name for alias in node.names] if isinstance(node, ast.Import) else []
        for name in names:
            if name and name.startswith("server."):
                used = name.split(".")[1]
                if used == "paths":
                    continue
                assert ORDER.index(used) <= ORDER.index(room), f"{path.name} imports {name}"


@pytest.mark.parametrize("path", [p for p in MODULES if p.parent.name != "web"], ids=lambda p: p.name)
def test_no_http_outside_the_web_room(path):
    text = path.read_text()
    assert "fastapi" not in text
    assert "pydantic" not in text
