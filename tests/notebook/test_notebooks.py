"""Every notebook runs top to bottom, and is kept without outputs."""

import ast
import html

import nbformat
import pytest
from bench_examples import ROOT
from nbclient import NotebookClient

NOTEBOOKS = sorted((ROOT / "notebooks").glob("*.ipynb"))
LONGEST_S = 300
PANDAS_CUTS_AT = 50  # letters of a cell, unless told otherwise (pandas' documentation of display.max_colwidth)


@pytest.mark.parametrize("path", NOTEBOOKS, ids=lambda path: path.stem)
def test_kept_without_outputs_and_with_a_kernel(path):
    notebook = nbformat.read(path, as_version=4)
    assert notebook.metadata["kernelspec"]["name"] == "python3"
    for cell in notebook.cells:
        assert not cell.get("outputs")
        assert cell.get("execution_count") is None


@pytest.mark.parametrize("folder", ["notebooks", "."], ids=["its own folder", "the root"])
def test_the_week_runs_from(folder):
    notebook = nbformat.read(ROOT / "notebooks" / "week.ipynb", as_version=4)
    notebook.cells.append(
        nbformat.v4.new_code_cell("workbench.desk.mission.name, workbench.replan.background.is_running")
    )
    NotebookClient(notebook, timeout=LONGEST_S, resources={"metadata": {"path": str(ROOT / folder)}}).execute()
    assert notebook.cells[-1].outputs[0]["data"]["text/plain"] == "('MARSHLIGHT-1 week 50', True)"
    assert "application/vnd.jupyter.widget-view+json" in notebook.cells[-2].outputs[0]["data"]


def run(notebook) -> list[dict]:
    """What each cell shows, in every form that it has."""
    NotebookClient(notebook, timeout=LONGEST_S, resources={"metadata": {"path": str(ROOT / "notebooks")}}).execute()
    return [output["data"] for cell in notebook.cells for output in cell.get("outputs", ()) if "data" in output]


def no_words_for_what_python_cannot_show(shown: list[dict]) -> bool:
    in_words_only = [data["text/plain"] for data in shown if data.keys() == {"text/plain"}]
    return not any(words.startswith("<") for words in in_words_only)


def test_which_station_next_runs_top_to_bottom():
    shown = run(nbformat.read(ROOT / "notebooks" / "which_station_next.ipynb", as_version=4))
    assert shown
    assert no_words_for_what_python_cannot_show(shown)


def test_can_we_afford_it_runs_top_to_bottom_and_tells_its_reasons_whole():
    notebook = nbformat.read(ROOT / "notebooks" / "can_we_afford_it.ipynb", as_version=4)
    notebook.cells.append(nbformat.v4.new_code_cell('asked["reason"], answer.reason'))
    *shown, reasons = run(notebook)
    assert no_words_for_what_python_cannot_show(shown)
    tables = [html.unescape(data["text/html"]) for data in shown if "text/html" in data]
    for reason in ast.literal_eval(reasons["text/plain"]):
        assert len(reason) > PANDAS_CUTS_AT
        assert any(reason in table for table in tables)
