"""Every notebook runs top to bottom, and is kept without outputs."""

import nbformat
import pytest
from bench_examples import ROOT
from nbclient import NotebookClient

NOTEBOOKS = sorted((ROOT / "notebooks").glob("*.ipynb"))
LONGEST_S = 300


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


@pytest.mark.parametrize("name", ["can_we_afford_it", "which_station_next"])
def test_runs_top_to_bottom(name):
    notebook = nbformat.read(ROOT / "notebooks" / f"{name}.ipynb", as_version=4)
    NotebookClient(notebook, timeout=LONGEST_S, resources={"metadata": {"path": str(ROOT / "notebooks")}}).execute()
    shown = [output["data"] for cell in notebook.cells for output in cell.get("outputs", ()) if "data" in output]
    in_words_only = [data["text/plain"] for data in shown if data.keys() == {"text/plain"}]
    assert shown
    assert not any(words.startswith("<") for words in in_words_only)  # Python's words for what it cannot show
