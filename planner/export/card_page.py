"""A pass card drawn as one A4 page."""

from datetime import UTC

from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle

from planner.charts import style
from planner.charts.skytrack import draw_skytrack
from planner.export.commands import radio_and_commands
from planner.export.fold import fold, shortened
from planner.mission.models import Mission
from planner.sky import Sky

LEFT, RIGHT, FOOT = 0.07, 0.93, 0.055  # of the page
LINE = 0.0158  # of the page's height, for text of 9.5 points
LETTERS, FIGURES_BESIDE = 100, 72  # of 9.5 points that fit across the page, and beside a label
BELOW_THE_SKY = 0.58
DIRECTION_ENDS = (0.37, 0.515)  # of the page, where azimuth and elevation end
SCALES = (1.2, 1.1, 1.05, 1.0, 0.95, 0.9, 0.85, 0.8, 0.75, 0.7, 0.6, 0.5)  # tried in turn until all fits
LEGIBLE = 0.8  # the least that is taken to name more contacts


def card_figure(card, mission: Mission, sky: Sky) -> Figure:
    """The page of one `Card`: times and sky side by side, then radio, cautions, what to do without lock."""
    column = _fitting_column(card)
    with style.on_paper():
        figure = style.new_figure(style.A4_PORTRAIT_IN)
        figure.set_layout_engine(None)
        _heading(figure, card)
        _sky(figure, card, mission, sky)
        for x, y, text, options in column.texts:
            figure.text(x, y, text, **options)
        for frame in column.frames:
            figure.add_artist(Rectangle(*frame, facecolor="none", edgecolor=style.INK, linewidth=1.2))
        _footer(figure, card)
    return figure


def _fitting_column(card) -> "_Column":
    """At the largest scale that fits; rather than in letters less than `LEGIBLE`, with fewer contacts named."""
    every = len(card.carried)
    ways = [(every, scale) for scale in SCALES if scale >= LEGIBLE]
    ways += [(named, LEGIBLE) for named in range(every - 1, 0, -1)]
    ways += [(min(every, 1), scale) for scale in SCALES if scale < LEGIBLE]
    columns = (_column(card, *way) for way in ways)
    return next((column for column in columns if column.y + column.line > FOOT), None) or _column(card, *ways[-1])


def _column(card, named: int, scale: float) -> "_Column":
    """What stands under the heading, laid out at one scale, so many of the carried contacts named."""
    column = _Column(0.866, scale)
    column.moments(card.times)
    column.y = min(column.y, BELOW_THE_SKY)
    column.rows("Radio and data", radio_and_commands(card, named))
    column.framed("Cautions", [f"! {caution}" for caution in card.cautions])
    column.lines(card.search_after, [f"{n}. {step}" for n, step in enumerate(card.steps, 1)])
    return column


class _Column:
    """Lays out down the page from `y`; `scale` shrinks letters and lines alike. Nothing is drawn yet."""

    def __init__(self, y: float, scale: float):
        self.y, self.scale, self.line = y, scale, LINE * scale
        self.texts: list[tuple[float, float, str, dict]] = []  # x, y, text, options
        self.frames: list[tuple[tuple[float, float], float, float]] = []  # corner, width, height

    def text(self, x: float, y: float, text: str, points: float = 9.5, **options) -> None:
        self.texts.append((x, y, text, {"fontsize": points * self.scale} | options))

    def title(self, title: str) -> None:
        self.text(LEFT, self.y, title, 11.5, fontweight="bold")
        self.y -= 1.35 * self.line

    def moments(self, moments) -> None:
        """Each moment over its time and direction, large, in the left half of the page, whatever the scale."""
        self.text(LEFT, self.y, "Times (UTC)", fontsize=13, fontweight="bold")
        for x, text in zip(DIRECTION_ENDS, ("azimuth", "elevation"), strict=True):
            self.text(x, self.y, text, fontsize=9.5, ha="right", color=style.LABEL)
        self.y -= 1.5 * LINE
        for label, time, *direction in moments:
            self.text(LEFT, self.y, label, fontsize=9.5, color=style.LABEL)
            self.y -= 1.25 * LINE
            self.text(LEFT, self.y, time, fontsize=14, fontweight="bold")
            for x, text in zip(DIRECTION_ENDS, direction, strict=True):
                self.text(x, self.y, text, fontsize=14, ha="right")
            self.y -= 1.45 * LINE

    def rows(self, title: str, rows) -> None:
        """Each text beside its label."""
        self.title(title)
        for label, text in rows:
            self.text(LEFT, self.y, label, color=style.LABEL)
            self.wrapped(LEFT + 0.19 * max(self.scale, 0.8), text, FIGURES_BESIDE)
        self.y -= 0.8 * self.line

    def framed(self, title: str, lines) -> None:
        """Lines in a frame, which black and white print keeps."""
        top = self.y + 1.1 * self.line
        self.lines(title, lines)
        bottom = self.y + 1.25 * self.line
        self.frames.append(((LEFT - 0.015, bottom), RIGHT - LEFT + 0.03, top - bottom))
        self.y -= 0.5 * self.line

    def lines(self, title: str, lines) -> None:
        self.title(title)
        for line in lines:
            self.wrapped(LEFT, line, LETTERS, hanging="    ")
        self.y -= self.line

    def wrapped(self, x: float, text: str, letters: int, hanging: str = "") -> None:
        for line in fold(text, int(letters / self.scale), hanging):
            self.text(x, self.y, line)
            self.y -= self.line


def _sky(figure: Figure, card, mission: Mission, sky: Sky) -> None:
    axes = figure.add_axes((0.57, 0.655, 0.36, 0.2), projection="polar")
    draw_skytrack(axes, mission, sky, card.session.pass_id, card.session, UTC)
    axes.legend(loc="upper center", bbox_to_anchor=(0.5, -0.12), ncols=2, fontsize=8, handlelength=1.6)


def _heading(figure: Figure, card) -> None:
    size = 19 if len(card.title) < 42 else 11
    for y, text, points, weight, letters in (
        (0.945, card.title, size, "bold", 42 if size == 19 else 76),
        (0.919, card.subtitle, 12.5, "normal", 74),
        (0.900, card.reference, 9.5, "normal", LETTERS),
    ):
        figure.text(LEFT, y, shortened(text, letters), fontsize=points, fontweight=weight)
    figure.add_artist(Line2D([LEFT, RIGHT], [0.892, 0.892], color=style.INK, linewidth=0.8))


def _footer(figure: Figure, card) -> None:
    figure.add_artist(Line2D([LEFT, RIGHT], [FOOT - 0.005] * 2, color=style.INK, linewidth=0.8))
    for n, line in enumerate(fold(card.footer, 112)):
        figure.text(LEFT, 0.036 - 0.013 * n, line, fontsize=8.5)
