"""The notebooks as they are kept: without outputs, and with every public name in use. `.ci/run` executes them."""

from __future__ import annotations

import ast
from pathlib import Path

import nbformat
import pytest

import gradeline

NOTEBOOKS = sorted((Path(__file__).resolve().parents[1] / "notebooks").glob("*.ipynb"))


def code(path: Path) -> list[nbformat.NotebookNode]:
    return [cell for cell in nbformat.read(path, as_version=4).cells if cell.cell_type == "code"]


def test_these_are_kept() -> None:
    assert [path.stem for path in NOTEBOOKS] == ["field_main", "laboratory_day", "three_years"]


@pytest.mark.parametrize("path", NOTEBOOKS, ids=lambda path: path.stem)
def test_a_notebook_is_kept_without_outputs(path: Path) -> None:
    nbformat.validate(nbformat.read(path, as_version=4))
    assert all(cell.outputs == [] and cell.execution_count is None for cell in code(path))


@pytest.mark.parametrize("path", NOTEBOOKS, ids=lambda path: path.stem)
def test_a_notebook_says_at_once_that_its_data_are_invented(path: Path) -> None:
    assert "invented" in " ".join(nbformat.read(path, as_version=4).cells[0].source.split())


def test_every_public_name_is_in_use() -> None:
    used = {
        node.attr
        for path in NOTEBOOKS
        for cell in code(path)
        for node in ast.walk(ast.parse(cell.source))
        if isinstance(node, ast.Attribute)
        and isinstance(node.value, ast.Name)
        and node.value.id == "gradeline"
    }
    assert used == set(gradeline.__all__)
