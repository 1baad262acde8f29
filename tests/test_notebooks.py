"""Every notebook runs from top to bottom, and what is stored in it is what a clean run left there."""

from __future__ import annotations

import os
import re
from pathlib import Path

import pytest

nbformat = pytest.importorskip("nbformat")
ROOT = Path(__file__).resolve().parents[1]
NOTEBOOKS = sorted((ROOT / "notebooks").glob("*.ipynb"))
IDS = [path.stem for path in NOTEBOOKS]
SECONDS = 300


def read(path):
    return nbformat.read(path, as_version=4)


def code_cells(book):
    return [cell for cell in book.cells if cell.cell_type == "code"]


def words(cell):
    """Everything a cell shows as text."""
    out = []
    for output in cell.outputs:
        out.append(output.get("text", ""))
        out += [data for kind, data in output.get("data", {}).items() if kind.startswith("text/")]
    return "\n".join(out)


def test_there_are_notebooks():
    assert NOTEBOOKS


@pytest.mark.parametrize("path", NOTEBOOKS, ids=IDS)
def test_it_runs_in_a_folder_of_its_own(path, tmp_path, monkeypatch):
    """Nothing is needed beside the package, and nothing is written but in the folder it runs in."""
    nbclient = pytest.importorskip("nbclient")
    monkeypatch.setenv("PYTHONPATH", os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")]).rstrip(os.pathsep))
    monkeypatch.delenv("MPLBACKEND", raising=False)  # so that figures are shown as they are to a reader
    before = {p: p.stat().st_mtime_ns for p in path.parent.rglob("*") if p.is_file()}
    book = read(path)
    nbclient.NotebookClient(book, timeout=SECONDS, kernel_name="python3", resources={"metadata": {"path": str(tmp_path)}}).execute()
    assert {p: p.stat().st_mtime_ns for p in path.parent.rglob("*") if p.is_file()} == before
    for cell in code_cells(book):
        assert not [o for o in cell.outputs if o.output_type == "error"]
        assert not [o for o in cell.outputs if o.output_type == "stream" and o.name == "stderr" and "Warning" in o.text], cell.source
    # as many results as are stored: the stored ones are from this notebook as it is
    assert [len(cell.outputs) > 0 for cell in code_cells(book)] == [len(cell.outputs) > 0 for cell in code_cells(read(path))]


@pytest.mark.parametrize("path", NOTEBOOKS, ids=IDS)
def test_what_is_stored_is_one_clean_run(path):
    book = read(path)
    nbformat.validate(book)
    cells = code_cells(book)
    assert [cell.execution_count for cell in cells] == list(range(1, len(cells) + 1))
    kinds = {output.output_type for cell in cells for output in cell.outputs}
    assert "error" not in kinds and kinds
    assert not [o for cell in cells for o in cell.outputs if o.output_type == "stream" and o.name == "stderr"]
    assert any("image/png" in o.get("data", {}) or "image/svg+xml" in o.get("data", {}) for cell in cells for o in cell.outputs)


@pytest.mark.parametrize("path", NOTEBOOKS, ids=IDS)
def test_it_tells_nothing_of_the_machine(path):
    book = read(path)
    said = "\n".join([*(cell.source for cell in book.cells), *(words(cell) for cell in code_cells(book)), str(dict(book.metadata))])
    found = re.search(r"(?<![\w.])/(?:home|root|tmp|work|Users|usr|opt|mnt|var)/|[A-Z]:\\\\|file://|https?://(?:localhost|127\.)", said)
    assert found is None, found and said[max(found.start() - 40, 0) : found.end() + 40]


@pytest.mark.parametrize("path", NOTEBOOKS, ids=IDS)
def test_it_reads_as_a_job(path):
    """It begins with a heading that says the job, ends in checks of its own, and carries the caution."""
    book = read(path)
    assert book.cells[0].cell_type == "markdown" and book.cells[0].source.startswith("# ")
    prose = "\n".join(cell.source for cell in book.cells if cell.cell_type == "markdown")
    assert "not a permit" in prose
    assert any(re.search(r"^assert ", cell.source, re.MULTILINE) for cell in code_cells(book))
