"""One test holds the floors: a module imports only lower floors, or its own folder."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parents[1] / "scanmass"
FLOORS = [
    {"errors", "doubt", "seeds", "progress"},
    {"units", "libraries"},  # half a floor up: they raise the faults and give the figures of the ground floor
    {"geometry"},
    {"materials", "scans"},
    {"cloud"},
    {"surface"},
    {"density"},
    {"mass"},
    {"uncertainty"},
    {"evidence"},
    {"decisions"},
    {"pipeline"},
    {"report"},
    {"batch", "studies"},
    {"cli"},
    {"__main__"},
]
FLOOR_OF = {name: floor for floor, names in enumerate(FLOORS) for name in names}


def imported(path: Path) -> set[str]:
    """The parts of scanmass that a module imports, at its top or inside a function."""
    parts = set()
    for node in ast.walk(ast.parse(path.read_text())):
        names = []
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom) and node.module is not None:
            assert node.level == 0, f"{path}: relative import"
            names = [node.module] if node.module != "scanmass" else [f"scanmass.{a.name}" for a in node.names]
        parts |= {name.split(".")[1] for name in names if name.startswith("scanmass.")}
    return parts


@pytest.mark.parametrize("path", sorted(PACKAGE.rglob("*.py")), ids=lambda p: str(p.relative_to(PACKAGE)))
def test_imports_go_down(path: Path) -> None:
    own = path.relative_to(PACKAGE).parts[0].removesuffix(".py")
    if own == "__init__":
        return
    for other in imported(path):
        assert other == own or FLOOR_OF[other] < FLOOR_OF[own], f"{own} must not import {other}"
