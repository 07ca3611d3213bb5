import hashlib
import io
import os
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from link_examples import make_station

from planner.errors import InputError
from planner.link import curve
from planner.link.atmosphere import Site, total_attenuation_db
from planner.link.curve import CurveRequest, attenuation_curves, cache_folder, joined_curves, request_curves

A_TWENTIETH_OF_A_DECIBEL = 0.05  # half of what budgets are compared to
REQUEST = CurveRequest(Site(52.0, 5.0, 0.02), 26.0, 45.0, 3.0, 0.6, (0.01, 1.0, 20.0))
TROPICAL = replace(REQUEST, site=Site(3.1, 101.7, 0.0))


@pytest.fixture
def folder(tmp_path, monkeypatch):
    """An empty cache on disk and nothing in memory."""
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path))
    monkeypatch.setenv("LOCALAPPDATA", str(tmp_path))
    attenuation_curves.cache_clear()
    yield tmp_path / "downlink-planner"
    attenuation_curves.cache_clear()


@pytest.mark.parametrize("request_", [REQUEST, TROPICAL])
def test_between_the_nodes_the_curve_follows_the_models(request_):
    elevation_deg = np.random.default_rng(1).uniform(5, 90, 500)
    curves = attenuation_curves(request_).at(elevation_deg).total_db
    for k, pct in enumerate(request_.unavailability_pct):
        models = total_attenuation_db(request_.site, 26.0, elevation_deg, pct, diameter_m=3.0)
        assert np.abs(curves[k] - models.total_db).max() < A_TWENTIETH_OF_A_DECIBEL


def test_below_five_degrees_within_half_a_percent():
    elevation_deg = np.linspace(0, 5, 333)
    models = total_attenuation_db(REQUEST.site, 26.0, elevation_deg, 0.01, diameter_m=3.0).total_db
    np.testing.assert_allclose(attenuation_curves(REQUEST).at(elevation_deg).total_db[0], models, rtol=0.005)


def test_a_curve_is_kept_on_disk_and_read_back(folder):
    computed = attenuation_curves(REQUEST).parts_db
    (kept,) = folder.iterdir()
    attenuation_curves.cache_clear()
    stamp = kept.stat().st_mtime_ns
    np.testing.assert_array_equal(attenuation_curves(REQUEST).parts_db, computed)
    assert kept.stat().st_mtime_ns == stamp


def as_kept(parts_db, key=REQUEST.key, kind="<f8") -> bytes:
    content = parts_db.astype(kind).tobytes()
    return hashlib.sha256(key.encode() + content).digest() + content


def a_zip(computed) -> bytes:
    file = io.BytesIO()
    np.savez(file, computed)
    return file.getvalue()


def an_array_file(computed) -> bytes:
    file = io.BytesIO()
    np.save(file, computed)
    return file.getvalue()


@pytest.mark.parametrize(
    "spoil",
    [
        lambda computed: b"",
        lambda computed: b"not an array",
        lambda computed: as_kept(computed)[: computed.nbytes // 2],
        lambda computed: as_kept(computed) + b"\0",
        lambda computed: as_kept(computed)[:32] + (computed / 2).tobytes(),
        lambda computed: as_kept(computed)[:32] + (-computed).tobytes(),
        lambda computed: as_kept(computed)[:32] + np.full_like(computed, np.nan).tobytes(),
        lambda computed: as_kept(computed[:, :1]),
        lambda computed: as_kept(computed, kind="<f4"),
        lambda computed: as_kept(computed, key=TROPICAL.key),
        lambda computed: b"PK\x03\x04" + as_kept(computed)[4:],
        lambda computed: b"PK\x05\x06" + bytes(18),
        lambda computed: b"\x93NUMPY\x02\0" + b"\xff" * 4 + b"{" * 1000,
        a_zip,
        an_array_file,
    ],
)
def test_a_copy_that_is_not_what_was_written_is_made_anew(folder, spoil):
    computed = attenuation_curves(REQUEST).parts_db
    (kept,) = folder.iterdir()
    whole = kept.read_bytes()
    assert whole == as_kept(computed)
    kept.write_bytes(spoil(computed))
    attenuation_curves.cache_clear()
    np.testing.assert_array_equal(attenuation_curves(REQUEST).parts_db, computed)
    assert kept.read_bytes() == whole


@pytest.mark.parametrize("put", [os.mkfifo, os.mkdir, lambda path: os.symlink(path, path)])
def test_a_pipe_a_folder_or_a_link_in_place_of_the_copy_keeps_nobody_waiting(folder, put):
    computed = attenuation_curves(REQUEST).parts_db
    (kept,) = folder.iterdir()
    kept.unlink()
    put(kept)
    attenuation_curves.cache_clear()
    np.testing.assert_array_equal(attenuation_curves(REQUEST).parts_db, computed)


def test_where_there_is_no_cache_folder_the_curve_is_computed(folder, monkeypatch):
    monkeypatch.setattr(curve, "cache_folder", lambda: None)
    assert np.isfinite(attenuation_curves(REQUEST).parts_db).all()
    assert not folder.exists()


def test_a_cache_that_cannot_be_written_is_no_error(tmp_path, monkeypatch):
    blocked = tmp_path / "a file, not a folder"
    blocked.write_text("")
    monkeypatch.setenv("XDG_CACHE_HOME", str(blocked))
    monkeypatch.setenv("LOCALAPPDATA", str(blocked))
    attenuation_curves.cache_clear()
    assert np.isfinite(attenuation_curves(REQUEST).parts_db).all()


def test_a_write_that_fails_half_way_leaves_nothing(folder, monkeypatch):
    def disk_full(*_):
        raise OSError("no space left on device")

    monkeypatch.setattr(os, "replace", disk_full)
    attenuation_curves(REQUEST)
    assert list(folder.iterdir()) == []


def test_the_key_holds_everything_that_matters(monkeypatch):
    others = [
        replace(REQUEST, site=replace(REQUEST.site, latitude_deg=52.1)),
        replace(REQUEST, site=replace(REQUEST.site, height_km=0.5)),
        replace(REQUEST, site=replace(REQUEST.site, rain_rate_mm_h=30.0)),
        replace(REQUEST, frequency_ghz=26.1),
        replace(REQUEST, tilt_deg=0.0),
        replace(REQUEST, diameter_m=3.1),
        replace(REQUEST, efficiency=0.61),
        replace(REQUEST, unavailability_pct=(0.01, 1.0)),
    ]
    keys = {REQUEST.key, *(other.key for other in others)}
    monkeypatch.setattr(curve.atmosphere, "library_version", lambda: "0.5.0")
    keys.add(REQUEST.key)
    assert len(keys) == len(others) + 2


def test_sets_of_percentiles_are_joined_in_their_order():
    both = joined_curves([attenuation_curves(REQUEST), attenuation_curves(TROPICAL)])
    assert both.at([10.0, 20.0]).rain_db.shape == (6, 2)
    np.testing.assert_array_equal(both.parts_db[:, :3], attenuation_curves(REQUEST).parts_db)


def test_below_a_gigahertz_the_models_lower_end_stands_in():
    assert request_curves(make_station(), 435.0, "RHCP", (1.0,)).frequency_ghz == 1.0


def test_a_frequency_beyond_the_models_is_refused_and_not_kept(folder):
    with pytest.raises(InputError, match="frequency must be 1 to 55 GHz"):
        attenuation_curves(replace(REQUEST, frequency_ghz=60.0))
    assert not folder.exists()


@pytest.mark.parametrize(
    ("platform", "variable", "expected"),
    [
        ("linux", "XDG_CACHE_HOME", "x"),
        ("linux", None, ".cache"),
        ("win32", "LOCALAPPDATA", "x"),
        ("win32", None, "AppData/Local"),
        ("darwin", None, "Library/Caches"),
    ],
)
def test_the_folder_is_the_platforms(platform, variable, expected, monkeypatch, tmp_path):
    monkeypatch.setattr(sys, "platform", platform)
    monkeypatch.setattr("pathlib.Path.home", lambda: tmp_path)
    for name in ("XDG_CACHE_HOME", "LOCALAPPDATA"):
        monkeypatch.delenv(name, raising=False)
    if variable:
        monkeypatch.setenv(variable, str(tmp_path / "x"))
    assert cache_folder() == tmp_path / expected / "downlink-planner"


@pytest.mark.parametrize(("variable", "platform"), [("XDG_CACHE_HOME", "linux"), ("LOCALAPPDATA", "win32")])
@pytest.mark.parametrize("relative", ["", "cache", "../cache"])
def test_a_relative_path_in_the_environment_is_ignored(variable, platform, relative, monkeypatch, tmp_path):
    """XDG Base Directory Specification 0.8, "Basics": all paths must be absolute, a relative one is to be ignored."""
    monkeypatch.setattr(sys, "platform", platform)
    monkeypatch.setenv(variable, relative)
    for home, expected in ((tmp_path, True), (Path("here"), False)):
        monkeypatch.setattr("pathlib.Path.home", lambda home=home: home)
        found = cache_folder()
        assert found.is_relative_to(tmp_path) if expected else found is None


def test_a_user_without_a_home_has_no_cache(monkeypatch):
    def nobody():
        raise RuntimeError("Could not determine home directory.")

    monkeypatch.delenv("XDG_CACHE_HOME", raising=False)
    monkeypatch.setattr("pathlib.Path.home", nobody)
    assert cache_folder() is None


def test_importing_the_room_loads_no_slow_library():
    code = "import sys, planner.link; print(sorted({'itur', 'astropy', 'matplotlib', 'ipywidgets'} & set(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
