"""A pass card drawn as one A4 page."""

import textwrap
from datetime import UTC

from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from planner.charts import style
from planner.charts.skytrack import draw_skytrack
from planner.mission.models import Mission
from planner.sky import Sky

LEFT, RIGHT, FOOT = 0.07, 0.93, 0.055  # of the page
LINE = 0.0172  # of the page's height, for text of 9.5 points
LETTERS = 100  # of 9.5 points that fit across the page
BELOW_THE_SKY = 0.555
SCALES = (1.0, 0.85, 0.7, 0.55)  # tried in this order until all that must be said fits on the page


def card_figure(card, mission: Mission, sky: Sky) -> Figure:
    """The page of one `Card`: times and sky side by side, then radio, what to do without lock, cautions."""
    for scale in SCALES:
        with style.on_paper():
            figure = style.new_figure(style.A4_PORTRAIT_IN)
            figure.set_layout_engine("none")
            _heading(figure, card)
            _sky(figure, card, mission, sky)
            column = _Column(figure, 0.865, scale)
            column.stacked("Times (UTC)", card.times)
            column.y = min(column.y, BELOW_THE_SKY)
            column.rows("Radio and data", card.radio)
            column.lines(card.search_after, [f"{n}. {step}" for n, step in enumerate(card.steps, 1)])
            column.lines("Cautions", [f"! {caution}" for caution in card.cautions], style.VERMILLION)
            _footer(figure, card)
        if column.y + column.line > FOOT:
            break
    return figure


class _Column:
    """Writes down the page from `y`; `scale` shrinks letters and lines alike."""

    def __init__(self, figure: Figure, y: float, scale: float):
        self.figure, self.y, self.scale, self.line = figure, y, scale, LINE * scale

    def text(self, x: float, y: float, text: str, points: float = 9.5, **options) -> None:
        self.figure.text(x, y, text, fontsize=points * self.scale, **options)

    def title(self, title: str, colour: str = style.INK) -> None:
        self.text(LEFT, self.y, title, 11.5, fontweight="bold", color=colour)
        self.y -= 1.35 * self.line

    def stacked(self, title: str, rows) -> None:
        """Each text under its label, in the left half of the page."""
        self.title(title)
        for label, text in rows:
            self.text(LEFT, self.y, label, color=style.FAINT)
            self.text(LEFT + 0.005, self.y - self.line, text, 10.5, family="DejaVu Sans Mono")
            self.y -= 2.4 * self.line

    def rows(self, title: str, rows) -> None:
        """Each text beside its label."""
        self.title(title)
        for label, text in rows:
            self.text(LEFT, self.y, label, color=style.FAINT)
            self.wrapped(LEFT + 0.20, text, LETTERS - 24)
        self.y -= self.line

    def lines(self, title: str, lines, colour: str = style.INK) -> None:
        self.title(title, colour)
        for line in lines:
            self.wrapped(LEFT, line, LETTERS, hanging="    ")
        self.y -= self.line

    def wrapped(self, x: float, text: str, letters: int, hanging: str = "") -> None:
        for line in textwrap.wrap(text, int(letters / self.scale), subsequent_indent=hanging) or [""]:
            self.text(x, self.y, line)
            self.y -= self.line


def _sky(figure: Figure, card, mission: Mission, sky: Sky) -> None:
    axes = figure.add_axes((0.55, 0.63, 0.37, 0.225), projection="polar")
    draw_skytrack(axes, mission, sky, card.session.pass_id, card.session, UTC)
    axes.legend(loc="upper center", bbox_to_anchor=(0.45, -0.12), ncols=3, fontsize=6.5, handlelength=1.6)


def _heading(figure: Figure, card) -> None:
    size = 18 if len(card.title) < 45 else 11
    for y, text, points, weight in ((0.945, card.title, size, "bold"), (0.915, card.subtitle, 10.5, "normal")):
        figure.text(LEFT, y, textwrap.shorten(text, 110, placeholder=" …"), fontsize=points, fontweight=weight)
    _rule(figure, 0.902)


def _footer(figure: Figure, card) -> None:
    _rule(figure, FOOT - 0.005)
    for n, line in enumerate(textwrap.wrap(card.footer, 130)):
        figure.text(LEFT, 0.036 - 0.013 * n, line, fontsize=7.5, color=style.FAINT)


def _rule(figure: Figure, y: float) -> None:
    figure.add_artist(Line2D([LEFT, RIGHT], [y, y], color=style.FAINT, linewidth=0.8))
