"""Attenuation against elevation, computed once and kept in memory and on disk.

The disk copy spares the ITU-R library's slow start. It is never needed: a missing, broken or unwritable cache only
costs the time to compute the curve again. A copy is believed while it holds the SHA-256 of its request and numbers.
"""

import hashlib
import os
import stat
import sys
import tempfile
from collections.abc import Iterable
from contextlib import suppress
from dataclasses import dataclass, fields
from functools import lru_cache
from pathlib import Path

import numpy as np

from planner.link import atmosphere
from planner.link.atmosphere import Attenuation, Site
from planner.link.polarisation import TILT_DEG
from planner.mission.station import Station

FORMAT = 2  # raised when atmosphere.py computes something else or a copy is written otherwise, so that none is misread
KEPT_AS = "<f8"
LAYER_KM = 2.0  # attenuation at low elevation is nearly straight against the path through a layer of this thickness
JUST_BELOW = 1 - 1e-9  # P.618 changes formula at 5 and 25 deg: a node on each side keeps a step a step
FROM_ZENITH_DEG = (0.0, 0.01, 0.04, 0.1, 0.2, 0.4, 0.7, 1.0, 1.5, 2.0, 3.0, 4.0, 5.0, 6.0, 8.0)
ELEVATIONS_DEG = np.unique(
    np.concatenate(
        [
            np.arange(0, 2, 0.1),
            np.arange(2, 10, 0.25),
            np.arange(10, 20, 0.5),
            np.arange(20, 82, 2.0),
            [5 * JUST_BELOW, 25 * JUST_BELOW, 25.0],
            90 - np.array(FROM_ZENITH_DEG),
        ]
    )
)


@dataclass(frozen=True)
class CurveRequest:
    """Everything that a set of curves depends on, one curve for each unavailability [% of the year]."""

    site: Site
    frequency_ghz: float
    tilt_deg: float
    diameter_m: float
    efficiency: float
    unavailability_pct: tuple[float, ...]

    @property
    def key(self) -> str:
        """Name of the copy on disk: a hash of the request, the nodes, the format and the library's version."""
        everything = (repr(self), ELEVATIONS_DEG.tolist(), FORMAT, atmosphere.library_version())
        return hashlib.sha256(repr(everything).encode()).hexdigest()


@dataclass(frozen=True, eq=False)
class AttenuationCurves:
    """Attenuation parts (4: gas, cloud, rain, scintillation; k unavailabilities; nodes) [dB] over ELEVATIONS_DEG."""

    parts_db: np.ndarray

    def at(self, elevation_deg) -> Attenuation:
        """Attenuation at each elevation (n,): arrays (k, n), k as many as unavailabilities were asked for.

        Linear between the nodes in `_coordinate`: within 0.03 dB of the models above 5 deg, the tests measure it.
        """
        nodes, wanted = _coordinate(ELEVATIONS_DEG), _coordinate(np.atleast_1d(elevation_deg))
        right = np.clip(np.searchsorted(nodes, wanted), 1, len(nodes) - 1)
        weight = (wanted - nodes[right - 1]) / (nodes[right] - nodes[right - 1])
        return Attenuation(*(self.parts_db[..., right - 1] * (1 - weight) + self.parts_db[..., right] * weight))


def _coordinate(elevation_deg):
    """Rises with elevation, and attenuation is nearly straight in it.

    Low down the path through a layer rules; near the zenith P.618's rain goes as the square root of the path's
    ground projection, whose slope is endless at 90 deg.
    """
    projection = np.cos(np.deg2rad(elevation_deg))
    return -atmosphere.path_factor(elevation_deg, LAYER_KM) - np.sqrt(np.maximum(projection, 0.0))


def request_curves(
    station: Station, frequency_mhz: float, polarisation: str, unavailability_pct: tuple[float, ...]
) -> CurveRequest:
    """What to ask for a station's dish; below 1 GHz the models' lower end stands in, an upper bound."""
    return CurveRequest(
        site=Site(station.latitude_deg, station.longitude_deg, station.altitude_m / 1e3, station.rain_rate_mm_h),
        frequency_ghz=max(frequency_mhz / 1e3, atmosphere.FREQUENCY_GHZ[0]),
        tilt_deg=TILT_DEG[polarisation],
        diameter_m=station.antenna.diameter_m,
        efficiency=station.antenna.efficiency,
        unavailability_pct=unavailability_pct,
    )


@lru_cache(maxsize=4096)
def attenuation_curves(request: CurveRequest) -> AttenuationCurves:
    """The curves, from memory, else from disk, else computed (and then written to disk where that works).

    Raises
    ------
    InputError : frequency or unavailability outside the models' range
    """
    folder, key = cache_folder(), request.key
    if folder is None:
        return AttenuationCurves(_compute(request))
    path = folder / f"attenuation-{key}.f8"
    parts_db = _read(path, key, (len(fields(Attenuation)), len(request.unavailability_pct), len(ELEVATIONS_DEG)))
    if parts_db is None:
        parts_db = _compute(request)
        _write(path, key, parts_db)
    return AttenuationCurves(parts_db)


def joined_curves(curves: Iterable[AttenuationCurves]) -> AttenuationCurves:
    """The unavailabilities of several sets in one, in their order."""
    return AttenuationCurves(np.concatenate([each.parts_db for each in curves], axis=1))


def cache_folder() -> Path | None:
    """Where the platform keeps what can be made again, under it a folder of our own; None where there is no such place.

    A relative path in the environment is not followed, as the XDG Base Directory Specification (0.8) asks.
    """
    variable, own = {
        "win32": ("LOCALAPPDATA", "AppData/Local"),
        "darwin": (None, "Library/Caches"),
    }.get(sys.platform, ("XDG_CACHE_HOME", ".cache"))
    base = Path(os.environ.get(variable, "") if variable else "")
    if not base.is_absolute():
        try:
            base = Path.home() / own
        except RuntimeError:  # neither HOME nor an entry for this user
            return None
    return base / "downlink-planner" if base.is_absolute() else None


def _compute(request: CurveRequest) -> np.ndarray:
    """Parts (4, k, nodes) [dB] from the models."""
    curves = [
        atmosphere.total_attenuation_db(
            request.site,
            request.frequency_ghz,
            ELEVATIONS_DEG,
            pct,
            diameter_m=request.diameter_m,
            efficiency=request.efficiency,
            tilt_deg=request.tilt_deg,
        )
        for pct in request.unavailability_pct
    ]
    return np.array([[getattr(curve, part.name) for curve in curves] for part in fields(Attenuation)])


def _digest(key: str, content: bytes) -> bytes:
    return hashlib.sha256(key.encode() + content).digest()


def _read(path: Path, key: str, shape: tuple[int, ...]) -> np.ndarray | None:
    """The array kept at `path`, or None where there is none that can be trusted."""
    size = hashlib.sha256().digest_size + np.dtype(KEPT_AS).itemsize * int(np.prod(shape))
    try:
        handle = os.open(path, os.O_RDONLY | getattr(os, "O_NONBLOCK", 0) | getattr(os, "O_BINARY", 0))
        status = os.fstat(handle)
        if not stat.S_ISREG(status.st_mode) or status.st_size != size:  # a pipe would keep us waiting for ever
            os.close(handle)
            return None
        with open(handle, "rb") as file:
            digest, content = file.read(hashlib.sha256().digest_size), file.read()
    except OSError:
        return None
    return np.frombuffer(content, KEPT_AS).reshape(shape) if digest == _digest(key, content) else None


def _write(path: Path, key: str, parts_db: np.ndarray) -> None:
    """Whole or not at all: written beside its place, then moved there. Failing is no error."""
    content = parts_db.astype(KEPT_AS).tobytes()
    with suppress(OSError):
        path.parent.mkdir(parents=True, exist_ok=True)
        handle, draft = tempfile.mkstemp(dir=path.parent, suffix=".draft")
        try:
            with os.fdopen(handle, "wb") as file:
                file.write(_digest(key, content) + content)
            os.replace(draft, path)
        except BaseException:  # Ctrl-C too
            Path(draft).unlink(missing_ok=True)
            raise
