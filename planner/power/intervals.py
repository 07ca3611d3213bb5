"""A week cut into intervals in which everything but the charge is constant, and sessions laid over it."""

from dataclasses import dataclass, fields, replace

import numpy as np

from planner.power.loads import Draw

SHORTEST_INTERVAL_S = 1e-3  # edges closer than this are one


@dataclass(frozen=True)
class Intervals:
    """A week cut into n intervals in which all is constant, for one corner; arrays (n,), edges (n + 1,)."""

    edges_s: np.ndarray
    array_w: np.ndarray
    draw: Draw
    session_w: np.ndarray  # the part of the draw that sessions cause, at the bus
    battery_c: np.ndarray
    visible_sun: np.ndarray
    attitude: np.ndarray  # index into `attitudes`
    attitudes: tuple[str, ...]

    @property
    def load_w(self) -> np.ndarray:
        """Power the bus gives to all loads, their converters included."""
        return self.draw.bus_w

    @property
    def duration_s(self) -> np.ndarray:
        return np.diff(self.edges_s)

    def take(self, index, edges_s) -> "Intervals":
        """The same week cut at `edges_s`, each new interval lying inside the old one of `index`."""
        return replace(
            self,
            edges_s=edges_s,
            array_w=self.array_w[index],
            draw=self.draw.take(index),
            session_w=self.session_w[index],
            battery_c=self.battery_c[index],
            visible_sun=self.visible_sun[index],
            attitude=self.attitude[index],
        )


def merged_edges_s(*sets_s, span_s: float):
    """All edges inside the span in order, with its two ends; edges within a millisecond of one another are one."""
    edges_s = np.unique(np.clip(np.concatenate([[0.0, span_s], *sets_s]), 0.0, span_s))
    kept = np.concatenate([[True], np.diff(edges_s) > SHORTEST_INTERVAL_S])
    kept[-1] = True
    if len(edges_s) > 2 and edges_s[-1] - edges_s[-2] <= SHORTEST_INTERVAL_S:
        kept[-2] = False
    return edges_s[kept]


def interval_of(edges_s, time_s):
    """Index of the interval that holds each moment; the first or last one for moments outside."""
    return np.clip(np.searchsorted(edges_s, time_s, side="right") - 1, 0, len(edges_s) - 2)


@dataclass(frozen=True)
class Overlay:
    """What one session changes between its own `edges_s` (n + 1,): its loads add, the rest replaces.

    A session that flies in the idle attitude `turns` nothing: it leaves attitude to whichever session asks for one.
    """

    edges_s: np.ndarray
    draw: Draw
    array_w: np.ndarray
    attitude: np.ndarray

    @property
    def turns(self) -> bool:
        return bool(self.attitude.any())


def lay_over(idle: Intervals, overlays: list[Overlay]) -> Intervals:
    """The idle week with sessions laid over it, which come in order of time.

    Where two overlap their loads add, and array power and attitude are those of the first that turns the satellite.
    """
    edges_s = merged_edges_s(idle.edges_s, *(one.edges_s for one in overlays), span_s=float(idle.edges_s[-1]))
    middle_s = 0.5 * (edges_s[1:] + edges_s[:-1])
    week = idle.take(interval_of(idle.edges_s, middle_s), edges_s)  # a copy: filled in place below
    taken = 0
    for one in overlays:
        begin, end = np.searchsorted(middle_s, one.edges_s[[0, -1]])
        rows = interval_of(one.edges_s, middle_s[begin:end])
        for column in fields(Draw):
            getattr(week.draw, column.name)[begin:end] += getattr(one.draw, column.name)[rows]
        week.session_w[begin:end] += one.draw.bus_w[rows]
        if not one.turns:
            continue
        free = min(max(begin, taken), end)
        week.array_w[free:end] = one.array_w[rows[free - begin :]]
        week.attitude[free:end] = one.attitude[rows[free - begin :]]
        taken = max(taken, end)
    return week
