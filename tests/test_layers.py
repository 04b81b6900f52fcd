"""The layers of the house: a part imports only what stands above it in the list."""

import ast
from pathlib import Path

import pytest

import leachkin

ROOT = Path(leachkin.__file__).parent

#: Top to bottom; a part may import any part of an earlier line, and itself. Parts that share a
#: line do not know each other.
LAYERS = [
    ("errors",),
    ("constants",),
    ("tables",),
    ("units",),
    ("problems",),
    ("result_table",),
    ("run_record",),
    ("files",),
    ("chemistry", "inference"),
    ("testwork",),
    ("kinetics",),
    ("scaleup", "cementation"),
    ("reagents", "hazards"),
    ("campaign",),
    ("report", "published_checks"),
    ("cli",),
]
RANK = {part: rank for rank, line in enumerate(LAYERS) for part in line}
#: Outside libraries that only the named parts may import.
ONLY_IN = {
    "openpyxl": {"files"},
    "matplotlib": {"report"},
    "jinja2": {"report"},
    "click": {"cli"},
    "pint": {"units"},
    "pandas": {"result_table"},
    "lmfit": {"inference"},
    "emcee": {"inference"},
}
MODULES = sorted(
    p for p in ROOT.rglob("*.py") if p.parent != ROOT or p.stem not in ("__init__", "__main__")
)


def part_of(module: Path) -> str:
    relative = module.relative_to(ROOT)
    return relative.parts[0] if len(relative.parts) > 1 else relative.stem


def imports_of(module: Path):
    """Every imported module name, those inside functions too."""
    for node in ast.walk(ast.parse(module.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from ((alias.name, node.lineno) for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{module}, line {node.lineno}: relative import"
            yield node.module, node.lineno
            if node.module == "leachkin":
                yield from ((f"leachkin.{alias.name}", node.lineno) for alias in node.names)


@pytest.mark.parametrize("module", MODULES, ids=lambda m: str(m.relative_to(ROOT)))
def test_imports_point_up(module):
    part = part_of(module)
    assert part in RANK, f"{part} has no place in the layers"
    for name, line in imports_of(module):
        where = f"{module.relative_to(ROOT)}, line {line}"
        words = name.split(".")
        if words[0] in ONLY_IN:
            assert part in ONLY_IN[words[0]], f"{where}: {part} may not import {words[0]}"
        if words[0] != "leachkin":
            continue
        assert len(words) > 1, f"{where}: imports the package root"
        assert words[1] == part or RANK[words[1]] < RANK[part], f"{where}: {part} imports {name}"


def test_every_part_is_in_the_layers():
    parts = {part_of(m) for m in MODULES}
    assert parts == set(RANK), "the list of layers and the folders differ"


def test_modules_stay_short():
    long = {
        str(m.relative_to(ROOT)): n
        for m in MODULES
        if (n := len(m.read_text(encoding="utf-8").splitlines())) > 500
    }
    assert not long, f"modules over 500 lines: {long}"
