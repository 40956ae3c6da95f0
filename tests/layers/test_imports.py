"""A run starts fast: what only some commands need is not imported with the layers."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

import groundglow.layers

HEAVY = {"PIL", "dask", "distributed", "matplotlib", "odc", "pyproj", "pystac", "scipy", "xarray"}
FILES = sorted(Path(groundglow.layers.__file__).parent.glob("*.py"))


def imported_at_once(tree: ast.Module) -> set[str]:
    """Top-level packages that a module imports outside functions and type checking."""
    found = set()
    for node in tree.body:
        if isinstance(node, ast.Import):
            found |= {name.name.split(".")[0] for name in node.names}
        elif isinstance(node, ast.ImportFrom) and node.module:
            found.add(node.module.split(".")[0])
    return found


@pytest.mark.parametrize("path", FILES, ids=lambda path: path.stem)
def test_nothing_heavy_is_imported_at_once(path: Path) -> None:
    assert not imported_at_once(ast.parse(path.read_text(encoding="utf-8"))) & HEAVY


def test_the_search_finds_what_is_there() -> None:
    assert imported_at_once(ast.parse("import PIL.Image\nfrom scipy import linalg")) == {"PIL", "scipy"}
    assert "zstandard" in set().union(*(imported_at_once(ast.parse(path.read_text())) for path in FILES))
