"""Imports go down, never up, never sideways between rooms of one floor."""

import ast
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
FLOORS = {
    "engine.columns": 0,
    "engine.batch": 0,
    "engine.ternary": 0,
    "engine.units": 0,
    "engine.errors": 0,
    "engine.version": 0,
    "engine.evidence": 0,
    "engine.policy": 0,
    "engine.log": 1,
    "engine.journal": 1,
    "engine.physics": 1,
    "engine.rules": 1,
    "engine.stats": 1,
    "engine.intake": 2,
    "engine.simulate": 2,
    "engine.replay": 3,
    "engine.reviews": 4,
    "engine": 4,
    "cases": 4,
    "reviewapp": 5,
}
FOREIGN = {"streamlit", "plotly", "xlsxwriter", "typst"}
CLOCKS = {("datetime", "now"), ("datetime", "utcnow"), ("date", "today")} | {
    ("time", "time"),
    ("Path", "cwd"),
    ("os", "getcwd"),
}
FILES = sorted((ROOT / "engine").rglob("*.py")) + sorted(
    (ROOT / "reviewapp").rglob("*.py")
)


def room_of(module: str) -> str | None:
    parts = module.split(".")
    if parts[0] in {"reviewapp", "cases"}:
        return parts[0]
    if parts[0] != "engine":
        return None
    return ".".join(parts[:2])


def imports_of(tree: ast.AST) -> list[str]:
    found = []
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            found += [name.name for name in node.names]
        elif isinstance(node, ast.ImportFrom):
            if node.module == "engine":
                found += [f"engine.{name.name}" for name in node.names]
            else:
                found.append(node.module or "")
    return found


def module_of(path: Path) -> str:
    parts = path.relative_to(ROOT).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


@pytest.mark.parametrize("path", FILES, ids=module_of)
def test_a_file_imports_from_its_own_room_or_a_lower_floor(path):
    here = room_of(module_of(path)) or "engine"
    tree = ast.parse(path.read_text("utf-8"))
    for name in imports_of(tree):
        there = room_of(name)
        if there is None or there == here:
            continue
        if there not in FLOORS:  # a name exported by the face of the engine
            there = "engine"
        lower = FLOORS[there] < FLOORS[here]
        both_ground = FLOORS[there] == FLOORS[here] == 0
        face = here == "engine" and FLOORS[there] <= 4
        assert lower or both_ground or face, f"{here} must not import {name}"


@pytest.mark.parametrize(
    "path", [p for p in FILES if "engine" in p.relative_to(ROOT).parts], ids=module_of
)
def test_the_engine_knows_no_screen_no_clock_and_no_working_folder(path):
    tree = ast.parse(path.read_text("utf-8"))
    assert not {name.split(".")[0] for name in imports_of(tree)} & FOREIGN
    calls = {
        (node.func.value.id, node.func.attr)
        for node in ast.walk(tree)
        if isinstance(node, ast.Call)
        and isinstance(node.func, ast.Attribute)
        and isinstance(node.func.value, ast.Name)
    }
    assert not calls & CLOCKS


def test_every_room_of_the_engine_has_its_floor():
    rooms = {room_of(module_of(p)) for p in FILES} - {"engine", None}
    assert rooms <= set(FLOORS) | {"engine"}
