"""One look for every picture: colours that the colour-blind tell apart, marks beside colours, type legible at A4."""

from collections.abc import Iterable
from datetime import UTC, tzinfo
from io import BytesIO

import matplotlib
import matplotlib.dates as mdates
from matplotlib.figure import Figure
from matplotlib.font_manager import findfont, get_font
from matplotlib.layout_engine import ConstrainedLayoutEngine

# Okabe and Ito, "Color Universal Design", 2008 (values from memory)
BLACK, ORANGE, SKY_BLUE, GREEN = "#000000", "#E69F00", "#56B4E9", "#009E73"
YELLOW, BLUE, VERMILLION, PURPLE = "#F0E442", "#0072B2", "#D55E00", "#CC79A7"
INK, FAINT, PALE = "#222222", "#8C8C8C", "#D9D9D9"  # text, secondary lines, areas
LABEL = "#555555"  # lesser text, still 7 to 1 against white (WCAG 2.2, 1.4.6 asks for that, from memory)

# A mode is told by colour and by marker, in the order in which the mission names its modes.
MODE_MARKS = ((BLUE, "^"), (ORANGE, "o"), (GREEN, "s"), (PURPLE, "D"), (BLACK, "v"))

A4_LANDSCAPE_IN = (11.69, 8.27)
A4_PORTRAIT_IN = (8.27, 11.69)
SCREEN_DPI = 96

FONT = "DejaVu Sans"  # ships with matplotlib, so every machine draws the same letters
ON_PAPER = {
    "font.family": [FONT],
    "font.size": 8.5,
    "axes.titlesize": 9.5,
    "axes.titlelocation": "left",
    "axes.labelsize": 8.5,
    "axes.edgecolor": FAINT,
    "axes.labelcolor": INK,
    "axes.linewidth": 0.6,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.formatter.useoffset": False,
    "text.color": INK,
    "text.parse_math": False,  # a station may be called "$_{"
    "xtick.color": INK,
    "ytick.color": INK,
    "xtick.labelsize": 8,
    "ytick.labelsize": 8,
    "lines.linewidth": 1.2,
    "hatch.linewidth": 0.5,
    "hatch.color": FAINT,
    "legend.frameon": False,
    "legend.fontsize": 8,
    "grid.color": PALE,
    "grid.linewidth": 0.5,
    "figure.facecolor": "white",
    "pdf.fonttype": 42,
    "date.epoch": "1970-01-01T00:00:00",
}  # fmt: skip


def on_paper():
    """Context in which figures are made: `with on_paper(): figure = new_figure(...)`."""
    return matplotlib.rc_context(ON_PAPER)


class Picture(Figure):
    """A figure that a notebook shows by itself, although no plotting window was ever asked for."""

    def _repr_png_(self) -> bytes:
        png = BytesIO()
        with on_paper():
            self.savefig(png, format="png", dpi=SCREEN_DPI)
        return png.getvalue()


def boxed(names: Iterable[str]) -> list[str]:
    """Those of the names with a letter that the font lacks: pictures and PDF show a box for it."""
    drawn = get_font(findfont(FONT)).get_charmap()
    return [name for name in dict.fromkeys(names) if any(ord(c) not in drawn for c in name if not c.isspace())]


def new_figure(size_in=A4_LANDSCAPE_IN, title: str = "", *, onto: Figure | None = None) -> Figure:
    """An empty figure that belongs to no window, or the figure `onto` emptied. `title` says the finding."""
    figure = onto if onto is not None else Picture(figsize=size_in)
    if onto is not None:
        figure.clear()
        figure.set_size_inches(*size_in)
    figure.set_layout_engine(ConstrainedLayoutEngine(w_pad=0.1, h_pad=0.05))
    if title:
        figure.suptitle(title, x=0.012, ha="left", fontsize=min(12.5, 1.6 * size_in[0]), fontweight="bold")
    return figure


def mode_marks(modes) -> dict[str, tuple[str, str]]:
    """(colour, marker) of each mode, by name."""
    return {mode: MODE_MARKS[index % len(MODE_MARKS)] for index, mode in enumerate(dict.fromkeys(modes))}


def time_axis(axes, time_zone: tzinfo = UTC, label: bool = True) -> None:
    """Days or hours along the x axis, by how much of them is in view; says which time it is."""
    begin, end = axes.get_xlim()
    if end - begin > 2.5:
        axes.xaxis.set_major_locator(mdates.DayLocator(interval=max(1, round((end - begin) / 10)), tz=time_zone))
        axes.xaxis.set_major_formatter(mdates.DateFormatter("%a %d %b", tz=time_zone))
        axes.xaxis.set_minor_locator(mdates.HourLocator(byhour=(6, 12, 18), tz=time_zone))
    else:
        locator = mdates.AutoDateLocator(minticks=5, maxticks=11, tz=time_zone)
        axes.xaxis.set_major_locator(locator)
        axes.xaxis.set_major_formatter(
            mdates.DateFormatter("%H:%M" if end - begin > 0.05 else "%H:%M:%S", tz=time_zone)
        )
    axes.grid(True, axis="x", which="major")
    axes.set_axisbelow(True)
    if label:
        first = mdates.num2date(begin, tz=time_zone)
        day = f", {first:%a %d %b %Y}" if end - begin <= 2.5 else f", {first:%Y}"
        axes.set_xlabel(f"time, {'UTC' if time_zone is UTC else time_zone}{day}")


def legend_above(axes, **options) -> None:
    """A legend in one row above the axes, where it covers nothing."""
    axes.legend(loc="lower left", bbox_to_anchor=(0.0, 0.985), ncols=6, borderaxespad=0.0, handlelength=1.8, **options)
