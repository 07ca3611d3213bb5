"""Pass ids: what they are made of, that they are one each, and that they outlive an element update."""

import re
from datetime import timedelta

import numpy as np
import pytest
from scipy.optimize import least_squares
from sky_examples import DAY_S, FIVE_SITES, START, clock_of, element_set, elements_of, station

from planner.errors import InputError
from planner.sky.clock import Clock
from planner.sky.pass_ids import pass_ids, slug
from planner.sky.passes import find_passes
from planner.sky.sites import Sites
from planner.sky.track import track_elements

ID = re.compile(r"[\w-]+\.[\w-]+\.\d{8}-\d\d[a-z]*")


def found(elements, stations, clock=None):
    clock = clock or clock_of()
    return find_passes(clock, [track_elements(clock, elements.name, elements)], stations)


def a_day_later(elements, in_track_km=5.0):
    """The set that would come a day later: fitted to the old one's states, and a little off along the track."""
    later = elements.epoch + timedelta(days=1)
    clock = Clock(later, DAY_S)
    sample_s = np.linspace(0, DAY_S, 60)
    target = elements.sgp4_model().sgp4_array(*clock.julian(sample_s))[1]
    names = ("mean_motion_rev_day", "eccentricity", "inclination_deg", "ra_of_asc_node_deg", "arg_of_pericenter_deg")

    def moved(x):
        values = dict(zip(names, x[:5].tolist(), strict=True))
        return elements.model_copy(
            update={**values, "mean_anomaly_deg": float(x[5]) % 360, "epoch": later, "rev_at_epoch": 0}
        )

    def miss(x):
        return (moved(x).sgp4_model().sgp4_array(*clock.julian(sample_s))[1] - target).ravel()

    turned = 360 * elements.mean_motion_rev_day % 360
    first = [getattr(elements, name) for name in names] + [elements.mean_anomaly_deg + turned]
    tries = [
        least_squares(miss, [*first[:5], first[5] + shift], x_scale=[1e-4, 1e-4, 1e-2, 1e-2, 1, 1])
        for shift in (-4, 0, 4)
    ]
    best = min(tries, key=lambda fit: fit.cost)
    assert np.abs(best.fun).max() < 5.0, "the fit must be a plausible update"
    radius_km = 42_241 / best.x[0] ** (2 / 3)
    return moved(best.x + np.array([0, 0, 0, 0, 0, np.degrees(in_track_km / radius_km)]))


@pytest.mark.parametrize("kind", ["marshlight", "low_inclination"])
def test_ids_hold_across_an_element_update(kind):
    """Elements a day apart that also carry no revolution number."""
    elements = elements_of(kind)
    before, after = found(elements, FIVE_SITES), found(a_day_later(elements), FIVE_SITES)
    low = {
        name
        for passes in (before, after)
        for name, top in zip(passes.pass_id, passes.max_elevation_deg, strict=True)
        if top < 10.5
    }
    kept_before = {name: t for name, t in zip(before.pass_id, before.tca_s, strict=True) if name not in low}
    kept_after = {name: t for name, t in zip(after.pass_id, after.tca_s, strict=True) if name not in low}
    assert kept_before.keys() == kept_after.keys()
    assert len(kept_before) > 40
    shift_s = [abs(kept_before[name] - kept_after[name]) for name in kept_before]
    assert 0.1 < max(shift_s) < 30.0  # the update moved the passes by seconds, and no id with them


def test_ids_do_not_depend_on_where_the_span_begins():
    elements = elements_of("marshlight")
    week = found(elements, FIVE_SITES)
    later = Clock(START + timedelta(days=2, hours=7, minutes=13), 2 * DAY_S)
    cut = found(elements, FIVE_SITES, later)
    begin_s = 2 * DAY_S + 7 * 3600 + 13 * 60
    same = week.take((week.los_s > begin_s) & (week.aos_s < begin_s + 2 * DAY_S))
    assert list(cut.pass_id) == list(same.pass_id)


@pytest.mark.parametrize("kind", ["marshlight", "low_inclination", "molniya_type", "geostationary"])
def test_every_pass_has_an_id_of_its_own_without_reserved_characters(kind):
    ids = list(found(elements_of(kind), FIVE_SITES).pass_id)
    assert len(set(ids)) == len(ids)
    assert all(ID.fullmatch(name) for name in ids), ids


def test_the_day_and_number_are_those_of_the_southernmost_point_before_the_pass():
    elements, site = elements_of("marshlight"), FIVE_SITES[0]
    clock = clock_of(2.0)
    passes = found(elements, [site], clock)
    early = Clock(START - timedelta(days=1), 4 * DAY_S)
    time_s = np.arange(-DAY_S, 2 * DAY_S, 5.0)
    track = track_elements(early, "t", elements)
    height = track.at(time_s + DAY_S)[0][:, 2]
    lowest_s = time_s[1:-1][(height[1:-1] < height[:-2]) & (height[1:-1] <= height[2:])]
    for name, aos_s in zip(passes.pass_id, passes.aos_s, strict=True):
        last = lowest_s[lowest_s < aos_s][-1]
        day = np.floor(last / DAY_S)
        number = np.count_nonzero((lowest_s >= day * DAY_S) & (lowest_s <= last))
        date = (START + timedelta(days=float(day))).strftime("%Y%m%d")
        assert name == f"marshlight-1.north.{date}-{number:02d}"


def test_a_southern_station_counts_from_the_northernmost_point():
    """Half a revolution apart: north and south number a pass between the two points differently."""
    north = station(1.0, 30.0, name="n", min_elevation_deg=0.0)
    south = station(-1.0, 30.0, name="s", min_elevation_deg=0.0)
    passes = found(elements_of("marshlight"), [north, south])
    tail = {(name.split(".")[1], name.split(".")[2]) for name in passes.pass_id}
    assert {t for s, t in tail if s == "n"} != {t for s, t in tail if s == "s"}


# Two masts, south and north of a station, that cut every high pass in two
MASTS = (
    (0.0, 5.0),
    (170.0, 5.0),
    (175.0, 89.0),
    (185.0, 89.0),
    (190.0, 5.0),
    (350.0, 5.0),
    (355.0, 89.0),
    (359.0, 89.0),
)


def test_letters_only_where_the_horizon_cuts_a_pass():
    plain, cut = (station(60.0, 10.0, name="x", horizon=line) for line in ((), MASTS))
    whole, pieces = found(elements_of("marshlight"), [plain]), found(elements_of("marshlight"), [cut])
    assert not any(name[-1].isalpha() for name in whole.pass_id)
    stems = {}
    for name in pieces.pass_id:
        stems.setdefault(name.rstrip("ab"), []).append(name)
    assert all(len(names) == 1 or names == [f"{stem}a", f"{stem}b"] for stem, names in stems.items())
    assert all(names[0] == stem for stem, names in stems.items() if len(names) == 1)
    assert any(len(names) == 2 for names in stems.values())
    assert set(stems) <= set(whole.pass_id)


def test_a_piece_keeps_its_letter_when_the_span_cuts_the_other_one_off():
    cut = station(60.0, 10.0, name="x", horizon=MASTS)
    pieces = found(elements_of("marshlight"), [cut])
    k = next(k for k, name in enumerate(pieces.pass_id) if name.endswith("a"))
    between_s = (pieces.los_s[k] + pieces.aos_s[k + 1]) / 2
    assert (
        found(elements_of("marshlight"), [cut], Clock(START + timedelta(seconds=between_s), 3600.0)).pass_id[0]
        == pieces.pass_id[k + 1]
    )
    assert found(elements_of("marshlight"), [cut], Clock(START, between_s)).pass_id[-1] == pieces.pass_id[k]


def test_equatorial_orbits_count_from_the_meridian_opposite_the_station():
    elements = element_set(inclination_deg=0.05)
    passes = found(elements, [station(0.0, 45.0, name="q")], clock_of(2.0))
    numbers = [int(name[-2:]) for name in passes.pass_id]
    assert 26 <= len(passes) <= 30  # 15 revolutions a day less the one the Earth makes
    assert len(set(passes.pass_id)) == len(passes)
    assert set(np.diff(numbers)) <= {1, -13, -12, -14}


@pytest.mark.parametrize(
    ("name", "expected"),
    [("MARSHLIGHT-1", "marshlight-1"), ("Corrie Head", "corrie-head"), ("a:b/c d", "a-b-c-d"), ("__", "x")],
)
def test_slugs(name, expected):
    assert slug(name) == expected


def test_names_that_would_share_ids_are_refused():
    with pytest.raises(InputError) as caught:
        found(
            elements_of("marshlight"),
            [station(60.0, 10.0, name="Corrie Head"), station(61.0, 10.0, name="corrie-head")],
        )
    assert str(caught.value) == (
        "station names must differ in more than case, blanks and signs, because pass ids are made of them,"
        " got 'Corrie Head' and 'corrie-head'"
    )


def test_no_passes_no_ids():
    clock = clock_of(1.0)
    track = track_elements(clock, "t", element_set())
    none = np.zeros(0, dtype=int)
    assert pass_ids(clock, track, Sites.of(FIVE_SITES), none, none.astype(float), none.astype(bool)).size == 0
