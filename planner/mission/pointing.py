"""Where the satellite points: two body axes, each with something to look at."""

from typing import Literal

from pydantic import Field, model_validator

from planner.mission.base import BodyAxis, Described, NonNegative, Positive, Windows

LawName = Literal["nadir", "sun", "station", "velocity", "tumbling"]
Target = Literal["nadir", "sun", "velocity", "orbit normal"]


class Law(Described):
    """`axis` is held exactly on what the law names; `second_axis` as near as it gets to `second_target`.

    Tumbling has no axes: every direction is equally likely and averages are used.
    """

    law: LawName
    axis: BodyAxis = (0.0, 0.0, 1.0)
    second_axis: BodyAxis = (1.0, 0.0, 0.0)
    second_target: Target = "velocity"

    @model_validator(mode="after")
    def _axes_differ(self):
        a, b = self.axis, self.second_axis
        cross = (a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0])
        lengths = sum(x * x for x in a) * sum(x * x for x in b)
        if sum(x * x for x in cross) < 1e-6 * lengths:
            raise ValueError(f"second_axis must not be parallel to axis, got {list(b)} and {list(a)}")
        if self.law == self.second_target:
            raise ValueError(f"second_target must differ from the law, got {self.second_target!r} for both")
        return self


class Pointing(Described):
    """The law when idle, the law in a session (a mode may bring its own), and how fast to turn between them."""

    idle: Law = Law(law="nadir")
    session: Law = Law(law="station", second_target="sun")
    slew_rate_deg_s: Positive = 1.0
    settle_s: NonNegative = 10.0
    slew_power_w: NonNegative = Field(default=0.0, description="extra draw on the bus while turning")
    no_slew_windows: Windows = Field(
        default=(), description="when a payload needs the idle attitude: no session that turns the satellite"
    )

    @property
    def longest_slew_s(self) -> float:
        """Half a turn and the time to settle."""
        return 180.0 / self.slew_rate_deg_s + self.settle_s
