"""The notebooks run from top to bottom and print again what is stored in them, digit by digit."""

from __future__ import annotations

import re
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import nbformat
import pytest

FOLDER = Path(__file__).resolve().parents[2] / "notebooks-examples"
NOTEBOOKS = sorted(FOLDER.glob("*.ipynb"))
#: In a process of its own: the kernel's machinery has threads and warnings that are not ours.
EXECUTE = """
import sys, nbformat
from nbclient import NotebookClient
source, target, folder = sys.argv[1:]
notebook = nbformat.read(source, as_version=4)
resources = {"metadata": {"path": folder}}
options = {"timeout": 1200, "kernel_name": "python3", "record_timing": False}
NotebookClient(notebook, resources=resources, **options).execute()
nbformat.write(notebook, target)
"""


def read(path: Path) -> Any:
    return nbformat.read(path, as_version=4)


def texts(cell: Any) -> Iterator[str]:
    """What a cell printed and returned, as text; pictures depend on fonts and are left out."""
    for output in cell.get("outputs", []):
        assert output["output_type"] != "error", output
        yield output["text"] if output["output_type"] == "stream" else output["data"]["text/plain"]


@pytest.fixture(scope="module", params=NOTEBOOKS, ids=lambda path: path.name)
def notebook(request: pytest.FixtureRequest) -> Path:
    assert isinstance(request.param, Path)
    return request.param


def test_there_is_a_notebook() -> None:
    assert "first_verdict.ipynb" in [path.name for path in NOTEBOOKS]


def test_notebook_prints_again_what_is_stored(notebook: Path, tmp_path: Path) -> None:
    executed = tmp_path / notebook.name
    command = [sys.executable, "-c", EXECUTE, str(notebook), str(executed), str(tmp_path)]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr[-4000:]
    stored, again = read(notebook), read(executed)
    assert len(stored.cells) == len(again.cells)
    for number, (before, after) in enumerate(zip(stored.cells, again.cells, strict=True)):
        assert list(texts(before)) == list(texts(after)), f"cell {number}"


def test_notebook_is_stored_executed_and_in_order(notebook: Path) -> None:
    cells = [cell for cell in read(notebook).cells if cell.cell_type == "code"]
    assert [cell.execution_count for cell in cells] == list(range(1, len(cells) + 1))
    assert sum("image/png" in output.get("data", {}) for cell in cells for output in cell.outputs) >= 2


def test_notebook_tells_nothing_of_the_machine_it_ran_on(notebook: Path) -> None:
    content = read(notebook)
    assert set(content.metadata) <= {"kernelspec", "language_info"}
    assert content.metadata.language_info == {"name": "python"}
    for cell in content.cells:
        assert not cell.metadata
        for text in texts(cell):
            assert not re.search(r"(?:^|[\s'\"(=])(?:/\w+/|[A-Z]:\\|~/)", text), text
