"""What an import loads, and who may import whom."""

import ast
import subprocess
import sys
from pathlib import Path

import pytest

import planner

PLANNER = Path(planner.__file__).parent
FORBIDDEN = {"matplotlib", "ipywidgets", "IPython", "itur", "astropy"}
# The river: a room imports from rooms to its left alone; link and power stand side by side
ROOMS = {
    "mission": set(),
    "sky": {"mission"},
    "link": {"mission", "sky"},
    "power": {"mission", "sky"},
    "data": {"mission", "sky", "link", "power"},
    "schedule": {"mission", "sky", "link", "power", "data"},
    "charts": {"mission", "sky", "link", "power", "data", "schedule"},
    "export": {"mission", "sky", "link", "power", "data", "schedule", "charts"},
    "notebook": {"mission", "sky", "link", "power", "data", "schedule", "charts", "export"},
}
FOR_ALL = {"errors", "units"}
DRAWING = {"charts", "export", "notebook"}
SOURCES = sorted(PLANNER.rglob("*.py"))


def loaded_by(statement: str) -> set[str]:
    """Packages in memory after a statement in a fresh interpreter."""
    program = f"{statement}\nimport sys\nprint(*{{name.partition('.')[0] for name in sys.modules}})"
    answer = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True, timeout=60)
    return set(answer.stdout.split())


@pytest.mark.parametrize(
    "statement",
    ["import planner", "from planner import load_mission, plan_week, audit, afford, link_budget", "import planner.cli"],
)
def test_importing_loads_no_plotting_no_widgets_and_not_the_rain_models(statement):
    assert not loaded_by(statement) & FORBIDDEN


def test_reading_a_mission_loads_no_solver():
    assert "scipy" not in loaded_by("import planner\nplanner.load_mission")


@pytest.mark.parametrize("name", planner.__all__)
def test_every_public_name_is_there(name):
    assert getattr(planner, name) is not None


def test_a_name_that_is_not_there():
    with pytest.raises(AttributeError, match="module 'planner' has no attribute 'plan_month'"):
        planner.plan_month  # noqa: B018


def imports(source: Path):
    """(module, line, whether at the top of the file) of each import."""
    tree = ast.parse(source.read_text())
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from ((alias.name, node.lineno, node in tree.body) for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{source}:{node.lineno}: imports by their whole name"
            below = (
                [f"{node.module}.{alias.name}" for alias in node.names] if node.module == "planner" else [node.module]
            )
            yield from ((name, node.lineno, node in tree.body) for name in below)


@pytest.mark.parametrize("room", ROOMS)
def test_a_room_imports_only_rooms_to_its_left(room):
    sources = sorted((PLANNER / room).rglob("*.py"))
    assert sources
    wrong = [
        f"{source.relative_to(PLANNER)}:{line}: {module}"
        for source in sources
        for module, line, _ in imports(source)
        if module.startswith("planner.") and module.split(".")[1] not in ROOMS[room] | FOR_ALL | {room}
    ]
    assert wrong == []


def test_no_room_is_forgotten():
    assert {path.name for path in PLANNER.iterdir() if (path / "__init__.py").is_file()} == set(ROOMS)


def test_heavy_libraries_are_imported_late():
    """At the top of a file only in the rooms that draw, which the rest import when they draw."""
    wrong = [
        f"{source.relative_to(PLANNER)}:{line}: {module}"
        for source in SOURCES
        for module, line, at_top in imports(source)
        if module.partition(".")[0] in FORBIDDEN and at_top and source.parent.name not in DRAWING
    ]
    assert wrong == []


@pytest.mark.parametrize("source", SOURCES, ids=lambda source: str(source.relative_to(PLANNER)))
def test_no_file_is_long(source):
    assert len(source.read_text().splitlines()) <= 400


def test_only_mission_reads_and_only_export_writes():
    """`open`, `read_*` and `write_*` of paths stand in these two rooms; the link's cache is the one exception."""
    doors = {"read_text", "read_bytes", "write_text", "write_bytes", "open"}
    wrong = []
    for room in set(ROOMS) - {"mission", "export", "link"}:
        for source in (PLANNER / room).rglob("*.py"):
            for node in ast.walk(ast.parse(source.read_text())):
                called = node.func if isinstance(node, ast.Call) else None
                name = getattr(called, "id", None) or getattr(called, "attr", None)
                if name in doors:
                    wrong.append(f"{source.relative_to(PLANNER)}:{node.lineno}: {name}")
    assert wrong == []
