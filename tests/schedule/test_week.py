"""What is computed once for a mission."""

import pytest
from small_missions import smaller

from planner.errors import InputError
from planner.mission.contacts import Session
from planner.schedule import week
from planner.schedule.result import prepared


def test_more_links_than_memory_holds_are_refused(marshlight, monkeypatch):
    monkeypatch.setattr(week, "MOST_LINKS", 5)
    with pytest.raises(InputError) as caught:
        week.prepare(smaller(marshlight, 0.5, "Vardholm"))
    assert str(caught.value) == (
        "MARSHLIGHT-1 week 50: passes x modes must be at most 5 to be planned at once, got 4 x 2;"
        " plan fewer days, stations or satellites"
    )


def test_a_session_is_within_reach_of_the_span_or_not(two_day_mission):
    made = prepared(two_day_mission)
    span_s = two_day_mission.span_s
    reached = [made.reaches(Session(on_s, on_s + 300.0, "MARSHLIGHT-1", "Vardholm", "K high rate", "p"))
               for on_s in (-1e9, -1801.0, -1800.0, 0.0, span_s, span_s + 1500.0, span_s + 1501.0)]  # fmt: skip
    assert reached == [False, False, True, True, True, True, False]


def test_every_second_of_payload_recording_is_produced(two_day_mission):
    made = prepared(two_day_mission)
    ((_, (edges_s, rate_mbps)),) = made.produced["MARSHLIGHT-1"]
    (source,) = two_day_mission.satellites[0].spacecraft.recorder.source
    idle = made.powers["MARSHLIGHT-1"].idle("nominal")
    sunlit_s = float(idle.visible_sun @ (idle.edges_s[1:] - idle.edges_s[:-1]))
    produced_mbit = float(rate_mbps @ (edges_s[1:] - edges_s[:-1]))
    assert produced_mbit == pytest.approx(source.rate_mbps * source.duty * sunlit_s)
    assert 0.55 < sunlit_s / two_day_mission.span_s < 1.0  # a low orbit is in shadow at most 40 % of the time
