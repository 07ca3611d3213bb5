"""Zeros of many functions at once."""

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from planner.sky.roots import WITHIN_S, crossings, refine

offsets = st.lists(st.floats(-0.99, 0.99), min_size=1, max_size=20).map(np.array)


@given(offsets, st.integers(0, 2), st.floats(0.1, 100))
def test_refined_zeros_are_the_functions_zeros(root, power, steepness):
    def function(x, k):
        return steepness * (x - root[k]) * (1 + (x - root[k]) ** 2) ** power

    everyone = np.arange(len(root))
    low, high = np.full(len(root), -1.0), np.full(len(root), 2.0)
    found = refine(function, low, high, function(low, everyone), function(high, everyone))
    assert np.abs(found - root).max() < WITHIN_S


@given(offsets, st.floats(0.01, 0.5))
def test_both_zeros_of_a_hump_between_two_points_are_found(top, half_width):
    low, high = np.full(len(top), -2.0), np.full(len(top), 2.0)
    k, found = crossings(lambda x, k: half_width**2 - (x - top[k]) ** 2, low, high)
    order = np.lexsort((found, k))
    expected = np.sort(np.stack([top - half_width, top + half_width], axis=1), axis=1).ravel()
    assert np.array_equal(k[order], np.repeat(np.arange(len(top)), 2))
    assert np.abs(found[order] - expected).max() < WITHIN_S


def test_a_hump_that_stays_below_zero_has_none():
    k, found = crossings(lambda x, k: -1.0 - x**2, np.array([-2.0]), np.array([2.0]))
    assert len(k) == len(found) == 0


def test_a_zero_at_an_end_is_that_end():
    assert list(refine(lambda x, k: x, [0.0], [1.0], [0.0], [1.0])) == [0.0]
    assert list(refine(lambda x, k: x - 1, [0.0], [1.0], [-1.0], [0.0])) == [1.0]


def test_nothing_to_do():
    none = np.zeros(0)
    assert refine(lambda x, k: x, none, none, none, none).size == 0
    assert crossings(lambda x, k: x, none, none)[1].size == 0
