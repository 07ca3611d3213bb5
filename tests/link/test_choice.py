import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from planner.link.choice import fastest_row, share_of_year, variable_rows, worthwhile_rows

NEEDS_DB = np.array([4.0, 7.0, 10.0, 13.0])
RULES = {"hysteresis_db": 0.5, "shortest_dwell_s": 30.0}


def follow(esn0_db, step_s=10.0, offsets=None, allowed=None, **rules):
    esn0_db = np.asarray(esn0_db, dtype=float)
    allowed = np.ones(len(esn0_db), bool) if allowed is None else allowed
    offsets = np.array([0, len(esn0_db)]) if offsets is None else offsets
    time_s = np.arange(len(esn0_db)) * step_s
    return variable_rows(esn0_db, time_s, offsets, NEEDS_DB, allowed, **RULES | rules)


def test_the_fastest_row_is_the_last_whose_need_is_met():
    rows = fastest_row(np.array([3.9, 4.0, 9.9, 20.0]), NEEDS_DB, np.ones(4, bool))
    assert rows.tolist() == [-1, 0, 1, 3]
    assert fastest_row(np.array([20.0]), NEEDS_DB, np.array([False])).tolist() == [-1]


def test_without_dwell_and_hysteresis_each_sample_has_its_fastest_row():
    level = 9 + 6 * np.sin(np.linspace(0, 6, 60))
    rows = follow(level, hysteresis_db=0.0, shortest_dwell_s=0.0)
    np.testing.assert_array_equal(rows, fastest_row(level, NEEDS_DB, np.ones(60, bool)))


def test_a_faster_row_waits_for_the_hysteresis():
    assert follow([5, 7.2, 7.4, 7.6, 7.6, 7.6, 7.6], shortest_dwell_s=0.0).tolist() == [0, 0, 0, 1, 1, 1, 1]


def test_a_row_that_would_not_last_is_not_taken():
    # 10 dB for two samples of 10 s, 30 s asked for
    assert follow([7, 7, 7, 11, 11, 7, 7, 7, 7]).tolist() == [1] * 9


def test_a_dip_is_held_for_the_dwell_too():
    assert follow([11, 11, 11, 11, 8, 11, 11, 11, 11, 11]).tolist() == [2, 2, 2, 2, 1, 1, 1, 2, 2, 2]


def test_a_drop_ahead_stops_the_rise_and_is_not_taken_early():
    assert follow([11, 11, 11, 11, 14, 8, 8, 8, 8]).tolist() == [2, 2, 2, 2, 2, 1, 1, 1, 1]


def test_the_end_of_the_usable_stretch_may_cut_a_dwell():
    assert follow([5, 5, 5, 5, 8, 8]).tolist() == [0, 0, 0, 0, 1, 1]
    assert follow([8, 8, 3, 8, 8]).tolist() == [1, 1, -1, 1, 1]


def test_passes_do_not_know_of_each_other():
    level = [11, 11, 11, 8, 8, 8]
    assert follow(level, offsets=np.array([0, 3, 6])).tolist() == [2, 2, 2, 1, 1, 1]


levels = st.lists(st.floats(0, 20), min_size=1, max_size=60)


@given(levels, st.floats(0, 3), st.floats(0, 60))
def test_the_margin_is_always_kept_and_segments_always_last(level, hysteresis_db, dwell_s):
    rows = follow(level, hysteresis_db=hysteresis_db, shortest_dwell_s=dwell_s)
    best = fastest_row(np.array(level), NEEDS_DB, np.ones(len(level), bool))
    assert (rows <= best).all()
    assert ((rows >= 0) == (best >= 0)).all()
    starts = np.flatnonzero(np.diff(rows, prepend=-2))
    for begin, end in zip(starts, [*starts[1:], None], strict=True):
        cut = end is None or rows[end] < 0 or rows[begin] < 0
        assert cut or (end - begin) * 10.0 >= dwell_s


@given(levels)
def test_a_slower_row_covers_a_faster_one_and_only_longer_ones_are_offered(level):
    usable = fastest_row(np.array(level), NEEDS_DB, np.ones(len(level), bool)) >= np.arange(4)[:, None]
    offered = worthwhile_rows(usable, np.array([0, len(level)]))
    counts = [row.sum() for row in offered if row.any()]
    assert counts == sorted(set(counts), reverse=True)
    if usable.any():
        fastest = np.flatnonzero(usable.any(axis=1))[-1]
        np.testing.assert_array_equal(offered[fastest], usable[fastest])
        np.testing.assert_array_equal(offered.any(axis=0), usable[0])


def test_a_row_may_be_worth_it_in_one_pass_and_not_in_another():
    usable = np.array([[True, True, True, True], [True, True, False, True]])
    offered = worthwhile_rows(usable, np.array([0, 2, 4]))
    assert offered.tolist() == [[False, False, True, True], [True, True, False, True]]


PERCENT = (0.001, 0.01, 0.1, 1.0, 10.0, 50.0)


def test_the_share_of_the_year_at_its_ends():
    margins = np.array([[1, -9, -2], [2, -8, -1], [3, -7, 0], [4, -6, 1], [5, -5, 2], [6, -4, 3]], dtype=float)
    np.testing.assert_allclose(share_of_year(margins, PERCENT), [1.0, 0.0, 0.999])


def test_the_share_is_log_linear_between_percentiles():
    margins = np.array([[-3.0], [-2.0], [-1.0], [1.0], [2.0], [3.0]])
    assert share_of_year(margins, PERCENT)[0] == pytest.approx(1 - 10**-0.5 / 100)


@given(st.lists(st.floats(-20, 20), min_size=6, max_size=6), st.floats(0, 5))
def test_more_margin_never_means_less_of_the_year(margins, more_db):
    ordered = np.sort(margins)[:, None]
    share, better = share_of_year(ordered, PERCENT)[0], share_of_year(ordered + more_db, PERCENT)[0]
    assert 0 <= share <= better <= 1
