"""One pass as the link and as the dish sees it: titles and marks against the sky they were drawn from."""

from itertools import combinations
from types import SimpleNamespace

import numpy as np
import pytest
from made_up_week import mission_and_sky

from planner.charts.contact import contact_figure
from planner.charts.skytrack import SQUARE_IN, finding, skytrack_figure
from planner.export.cards import PICTURE_IN
from planner.link.coding import modcods_of
from planner.link.table import LinkOption
from planner.mission.contacts import Session


@pytest.fixture(scope="module")
def mission():
    return mission_and_sky()[0]


@pytest.fixture(scope="module")
def sky():
    return mission_and_sky()[1]


@pytest.fixture(scope="module")
def row(sky):
    """The highest pass that the mount can follow."""
    followed = [sky.samples.trackable[sky.samples.of(k)].all() for k in range(len(sky.passes))]
    return int(np.argmax(np.where(followed, sky.passes.max_elevation_deg, 0)))


@pytest.fixture(scope="module")
def session(sky, row):
    passes = sky.passes
    return Session(
        tx_on_s=float(passes.aos_s[row] + 60),
        tx_off_s=float(passes.los_s[row] - 60),
        satellite="MARSHLIGHT-1",
        station=str(passes.station[row]),
        mode="K high rate",
        pass_id=str(passes.pass_id[row]),
    )


@pytest.fixture(scope="module")
def table(mission, sky):
    """Es/N0 by range alone, and the fastest MODCOD that leaves 3 dB."""
    transmitter = mission.satellites[0].spacecraft.transmitter[0]
    modcods = modcods_of(transmitter)
    needed = np.array([each.required_esn0_db for each in modcods]) + transmitter.implementation_loss_db
    esn0_db = 14 - 20 * np.log10(sky.samples.range_km / 700)
    fits = needed + 3.0 <= esn0_db[:, None]
    best = np.where(fits.any(1), np.argmax(np.where(fits, needed, -99), axis=1), -1)
    margin_db = esn0_db - np.where(best >= 0, needed[best], needed.min())
    return SimpleNamespace(
        satellite="MARSHLIGHT-1", mode=transmitter.mode, modcods=modcods, names=tuple(m.name for m in modcods),
        sample_index=np.arange(len(sky.samples)), pass_rows=np.arange(len(sky.passes)), offsets=sky.samples.offsets,
        time_s=sky.samples.time_s, esn0_db=esn0_db,
        options=(LinkOption("variable", best, margin_db, best >= 0, best * 1.0, best * 1.0),),
    )  # fmt: skip


def texts_of(axes):
    return [text.get_text() for text in axes.texts]


def test_the_contacts_title_tells_usable_seconds_and_lowest_margin(mission, sky, table, session, row):
    figure = contact_figure(mission, sky, table, session.pass_id, session=session)
    own, option = sky.samples.of(row), table.options[0]
    on_air = (table.time_s[own] >= session.tx_on_s) & (table.time_s[own] <= session.tx_off_s)
    lowest = option.margin_db[own][on_air].min()
    assert figure.get_suptitle().endswith(f"s usable, lowest margin on air {lowest:.1f} dB")
    assert figure.get_suptitle().startswith(f"K high rate over {session.station}: ")


def test_every_threshold_is_named_beside_its_line(mission, sky, table, session):
    level = contact_figure(mission, sky, table, session.pass_id).axes[0]
    assert texts_of(level)[0].startswith("QPSK 1/2  1.0")
    heights = {line.get_ydata()[0] for line in level.lines if len(set(line.get_ydata())) == 1}
    assert {each.required_esn0_db for each in table.modcods} <= heights


def test_the_height_of_the_level_above_a_threshold_is_the_margin(mission, sky, table, session, row):
    level = contact_figure(mission, sky, table, session.pass_id).axes[0]
    drawn = {line.get_label(): np.asarray(line.get_ydata(), dtype=float) for line in level.lines}
    gap_db = drawn["Es/N0 less implementation loss"] - drawn["active MODCOD needs"]
    own, option = sky.samples.of(row), table.options[0]
    assert gap_db[option.usable[own]] == pytest.approx(option.margin_db[own][option.usable[own]])
    assert np.all(np.isnan(gap_db) == ~option.usable[own])


def test_axes_carry_units_and_the_session_is_marked(mission, sky, table, session):
    figure = contact_figure(mission, sky, table, session.pass_id, session=session)
    labels = [axes.get_ylabel() for axes in figure.axes]
    assert labels == ["Es/N0, dB", "margin, dB", "elevation (solid), °", "range (dashed), km"]
    assert "transmission" in [text.get_text() for text in figure.axes[0].get_legend().get_texts()]


def test_a_pass_without_margin_says_how_much_is_missing(mission, sky, table, session):
    option = table.options[0]
    nothing = np.zeros(len(option.modcod))
    poor = LinkOption("poor", np.full(len(nothing), -1), nothing + 1.25, nothing > 0, nothing, nothing)
    figure = contact_figure(mission, sky, table, session.pass_id, option=poor)
    figure.draw_without_rendering()
    assert figure.get_suptitle().endswith("not usable, best margin 1.2 dB of the 3 dB asked for")


def test_an_unknown_pass_is_refused_by_name(mission, sky, table):
    with pytest.raises(KeyError, match="no pass 'nowhere' in the span"):
        contact_figure(mission, sky, table, "nowhere")
    with pytest.raises(KeyError, match="no pass 'nowhere' in the span"):
        skytrack_figure(mission, sky, "nowhere")


def test_the_track_is_azimuth_and_zenith_distance(mission, sky, session, row):
    axes = skytrack_figure(mission, sky, session.pass_id, session=session).axes[0]
    [track] = [line for line in axes.lines if line.get_label() == "pass"]
    own = sky.samples.of(row)
    assert np.degrees(track.get_xdata()) == pytest.approx(sky.samples.azimuth_deg[own])
    assert 90 - track.get_ydata() == pytest.approx(sky.samples.elevation_deg[own])
    assert axes.get_theta_direction() == -1  # east to the right, as on a map


def test_rise_and_set_are_written_with_their_times(mission, sky, session, row):
    axes = skytrack_figure(mission, sky, session.pass_id).axes[0]
    written = [text for text in texts_of(axes) if text.startswith(("AOS", "TCA", "LOS"))]
    assert [text[:3] for text in written] == ["AOS", "TCA", "LOS"]
    assert written[0] == f"AOS {sky.clock.iso(np.round(sky.passes.aos_s[row]))[11:19]}Z"


def test_a_mount_that_is_too_slow_is_told_and_drawn(mission, sky):
    lost = [k for k in range(len(sky.passes)) if not sky.samples.trackable[sky.samples.of(k)].all()]
    pass_id = str(sky.passes.pass_id[lost[0]])
    assert "mount too slow for" in finding(mission, sky, pass_id)
    labels = [line.get_label() for line in skytrack_figure(mission, sky, pass_id).axes[0].lines]
    assert "mount too slow" in labels


def test_the_sun_is_drawn_only_when_it_is_up(mission, sky):
    shown = {
        bool([line for line in skytrack_figure(mission, sky, str(pass_id)).axes[0].lines if line.get_marker() == "o"])
        for pass_id in sky.passes.pass_id[:30]
    }
    assert shown == {True, False}


@pytest.mark.parametrize("size_in", [SQUARE_IN, PICTURE_IN])
def test_times_along_the_track_cover_neither_the_track_nor_the_sun_nor_the_directions(sky, mission, size_in):
    for pass_id in sky.passes.pass_id[::9]:
        figure = skytrack_figure(mission, sky, str(pass_id), size_in=size_in, titled=False)
        figure.draw_without_rendering()
        [axes] = figure.axes
        [track] = [line for line in axes.lines if line.get_label() == "pass"]
        points = axes.transData.transform(np.column_stack([track.get_xdata(), track.get_ydata()]))
        suns = [line.get_window_extent() for line in axes.lines if line.get_marker() == "o"]
        others = [*suns, *(label.get_window_extent() for label in axes.get_xticklabels())]
        for text in axes.texts:
            box = text.get_window_extent()
            covered = sum(box.contains(*point) for point in points)
            assert covered <= 0.05 * len(points), text.get_text()  # a twentieth, at the mark itself
            assert not any(box.overlaps(other) for other in others), (pass_id, text.get_text())


def test_times_of_one_pass_stand_apart_and_on_the_picture(sky, mission):
    for pass_id in sky.passes.pass_id[::9]:
        figure = skytrack_figure(mission, sky, str(pass_id), size_in=PICTURE_IN, titled=False)
        figure.draw_without_rendering()
        boxes = [text.get_window_extent() for text in figure.axes[0].texts]
        assert not any(a.overlaps(b) for a, b in combinations(boxes, 2)), pass_id
        assert all(figure.bbox.x0 <= box.x0 and box.x1 <= figure.bbox.x1 for box in boxes), pass_id


def test_a_picture_beside_a_title_of_its_own_has_none(sky, mission, session):
    assert skytrack_figure(mission, sky, session.pass_id, titled=False).get_suptitle() == ""
    assert skytrack_figure(mission, sky, session.pass_id).get_suptitle() == finding(mission, sky, session.pass_id)
