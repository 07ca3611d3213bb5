"""Colours that can be told apart, and no plotting library behind `import planner`."""

import subprocess
import sys

import matplotlib
import numpy as np
import pytest

from planner.charts import style

# Okabe and Ito (2008) as RGB 0..255, from memory: orange, sky blue, bluish green, yellow, blue, vermillion, purple.
OKABE_ITO = {
    "ORANGE": (230, 159, 0), "SKY_BLUE": (86, 180, 233), "GREEN": (0, 158, 115), "YELLOW": (240, 228, 66),
    "BLUE": (0, 114, 178), "VERMILLION": (213, 94, 0), "PURPLE": (204, 121, 167), "BLACK": (0, 0, 0),
}  # fmt: skip


@pytest.mark.parametrize(("name", "rgb"), OKABE_ITO.items())
def test_the_palette_is_the_published_one(name, rgb):
    assert tuple(np.round(np.array(matplotlib.colors.to_rgb(getattr(style, name))) * 255)) == rgb


def test_names_that_the_font_cannot_draw_are_known():
    assert style.boxed(["Vardholm", "Мыс", "Dry Pan", "東京", "Tern 🛰"]) == ["東京", "Tern 🛰"]


def test_modes_differ_in_colour_and_in_marker():
    marks = style.mode_marks([f"mode {n}" for n in range(5)])
    assert len({colour for colour, _ in marks.values()}) == len({marker for _, marker in marks.values()}) == 5
    assert style.mode_marks(["a", "b", "a"]).keys() == {"a", "b"}


def test_drawing_leaves_no_trace_in_global_settings():
    before = dict(matplotlib.rcParams)
    with style.on_paper():
        style.new_figure(title="x")
    assert dict(matplotlib.rcParams) == before


def test_importing_planner_loads_no_plotting_library():
    code = "import planner, sys; print([name for name in ('matplotlib', 'ipywidgets', 'itur') if name in sys.modules])"
    assert subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout == "[]\n"


def test_charts_load_no_window_system():
    charts = ", ".join(f"planner.charts.{name}" for name in ("week", "contact", "skytrack"))
    code = f"import sys, {charts}; print('matplotlib.pyplot' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout == "False\n"
