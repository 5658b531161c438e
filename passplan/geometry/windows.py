"""The windows table: when each antenna can follow each spacecraft."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.identity import prefixes, slots, window_ids
from passplan.geometry.masks import Mask, mask_of, unbent
from passplan.geometry.passes import Rows, block_rows, joined
from passplan.geometry.reach import reach_of
from passplan.geometry.refraction import apparent_deg
from passplan.geometry.seams import settled, without_seams
from passplan.geometry.stations import stations
from passplan.geometry.timescale import datetimes_ms, utc_seconds
from passplan.geometry.timing import DEFAULT, timing_model
from passplan.geometry.trajectory import blocks
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.ephemeris import Ephemeris
from passplan.inputs.ground import Antenna, Site
from passplan.inputs.mounts import Mount
from passplan.inputs.policy import Timing
from passplan.inputs.run import OrbitSource

COLUMNS = (
    "window_id", "spacecraft", "antenna", "site", "aos_utc", "los_utc", "duration_s", "peak_utc",
    "peak_elevation_deg", "aos_azimuth_deg", "los_azimuth_deg", "min_range_km", "clipped",
    "element_epoch_utc", "timing_sigma_s",
)  # fmt: skip
# Samples (antennas x times) of one object that are worked on at once; bounds the memory of long horizons.
_SCENE_SAMPLES = 2_000_000
# More than the resolution of utc_s, less than what an ephemeris answers for beyond its span.
_ROUNDING_MS = 5e-4
_CLIPPED = ("none", "start", "end", "both")


def find_windows(
    orbits: Mapping[str, OrbitSource],
    antennas: Mapping[str, Antenna],
    sites: Mapping[str, Site],
    start_utc: np.datetime64,
    end_utc: np.datetime64,
    *,
    mounts: Mapping[str, Mount] | None = None,
    refraction: bool = False,
    timing: Timing = DEFAULT,
    progress: Callable[[int, int], None] | None = None,
) -> pd.DataFrame:
    """Every window of every spacecraft and antenna in [start_utc, end_utc), ordered by AOS, antenna, spacecraft.

    Elevation is geometric (no light time) above the WGS 84 ellipsoid's horizontal plane;
    SGP4 with WGS 72 constants, TEME turned to the Earth by GMST with Skyfield's built-in UT1, polar motion
    off. Instants agree with the roots of Skyfield's ``altaz`` to a millisecond, the table's resolution.
    With ``refraction`` masks and limits hold for elevations as ITU-R P.834 bends them, and the peak is stated
    so; without it nothing is bent. ``mounts`` (by name) cut windows to where the antenna can point; rates and
    cables are looked at later, by :mod:`passplan.geometry.survey`. ``timing`` says how sigmas grow. An
    object that SGP4 gives up on, or whose ephemeris ends, has its last window cut there.

    ``progress(done, total)`` counts spacecraft. Columns as ``COLUMNS``; times are ``datetime64[ms]`` in
    UTC, ``clipped`` tells which ends are cut by the horizon, ``element_epoch_utc`` is NaT for an ephemeris.
    """
    start_s, end_s = float(utc_seconds(start_utc)), float(utc_seconds(end_utc))
    heights = [sites[antenna.site].height_m / 1e3 if refraction else None for antenna in antennas.values()]
    masks = [_seen(mask_of(antenna), height) for antenna, height in zip(antennas.values(), heights, strict=True)]
    reaches = [
        reach_of((mounts or {}).get(antenna.mount or ""), height)
        for antenna, height in zip(antennas.values(), heights, strict=True)
    ]
    places = stations([sites[antenna.site] for antenna in antennas.values()])
    parts: list[Rows] = []
    done: set[int] = set()
    if orbits and antennas:
        for block in blocks(orbits, start_s, end_s, len(antennas)):
            share = max(1, _SCENE_SAMPLES // max(1, block.positions_km[0].size))
            for at in range(0, len(masks), share):
                some = np.arange(at, min(at + share, len(masks)))
                limits = [masks[i] for i in some], [reaches[i] for i in some]
                parts.append(block_rows(block, places.subset(some), limits[0], some, start_s, end_s, limits[1]))
            done.update(block.objects.tolist())
            if progress is not None:
                progress(len(done), len(orbits))
    if progress is not None and len(done) < len(orbits):
        progress(len(orbits), len(orbits))
    if not parts:
        return _empty()
    rows = joined(parts)
    messages = {i: source for i, source in enumerate(orbits.values()) if isinstance(source, Ephemeris)}
    if messages and rows.spacecraft.size:
        rows = without_seams(settled(rows, messages, places, masks))
    table = _table(rows, orbits, antennas, start_s, end_s, timing)
    if refraction:
        height_km = np.array([sites[name].height_m / 1e3 for name in table["site"]])
        table["peak_elevation_deg"] = apparent_deg(table["peak_elevation_deg"].to_numpy(), height_km)
    return table


def _seen(mask: Mask, height_km: float | None) -> Mask:
    """The mask for geometric elevations: where there is refraction, objects come over it earlier."""
    return mask if height_km is None else unbent(mask, height_km)


def _table(
    rows: Rows, orbits: Mapping[str, OrbitSource], antennas: Mapping[str, Antenna], start_s: float, end_s: float,
    timing: Timing,
) -> pd.DataFrame:
    names, antenna_names = list(orbits), list(antennas)
    pair_prefix = [prefix for row in prefixes(names, antenna_names) for prefix in row]
    slot = slots(rows.culmination_s, rows.whole_end_s - rows.whole_start_s)
    pair = rows.antenna * len(names) + rows.spacecraft
    ids = window_ids(pair_prefix, pair, slot, rows.whole_start_s)
    aos, los = np.rint(rows.start_s * 1e3), np.rint(rows.end_s * 1e3)
    low = rows.open_start & (rows.whole_start_s > start_s)
    aos[low] = np.ceil(rows.start_s[low] * 1e3 - _ROUNDING_MS)
    high = rows.open_end & (rows.whole_end_s < end_s)
    los[high] = np.floor(rows.end_s[high] * 1e3 + _ROUNDING_MS)
    order = np.flatnonzero(rows.inside & (los > aos))
    key = (aos[order] - start_s * 1e3).astype(np.int64) * len(antennas) + _ranks(antenna_names)[rows.antenna[order]]
    order = order[np.argsort(key * len(orbits) + _ranks(names)[rows.spacecraft[order]])]
    rows, ids, aos, los = rows.take(order), ids.take(order), aos[order], los[order]
    peak = np.clip(np.rint(rows.peak_s * 1e3), aos, los)
    clipped = (rows.whole_start_s < start_s) + 2 * (rows.whole_end_s > end_s)
    return pd.DataFrame(
        {
            "window_id": ids,
            "spacecraft": _words(names, rows.spacecraft),
            "antenna": _words(antenna_names, rows.antenna),
            "site": _words([antenna.site for antenna in antennas.values()], rows.antenna),
            "aos_utc": datetimes_ms(aos / 1e3),
            "los_utc": datetimes_ms(los / 1e3),
            "duration_s": (los - aos) / 1e3,
            "peak_utc": datetimes_ms(peak / 1e3),
            "peak_elevation_deg": rows.peak_deg,
            "aos_azimuth_deg": rows.start_azimuth_deg,
            "los_azimuth_deg": rows.end_azimuth_deg,
            "min_range_km": rows.range_km,
            "clipped": _words(_CLIPPED, clipped),
            "element_epoch_utc": _epochs(orbits)[rows.spacecraft],
            "timing_sigma_s": timing_model(list(orbits.values()), timing).sigma_s(rows.spacecraft, aos / 1e3),
        },
        columns=list(COLUMNS),
    )


def _words(names: Sequence[str], index: NDArray[np.int64]) -> pd.api.extensions.ExtensionArray:
    """A text column of ``names[index]``."""
    return pd.array(list(names), dtype="str").take(index)


def _ranks(names: list[str]) -> np.ndarray:
    """Place of each name in alphabetical order."""
    ranks = np.empty(len(names), np.int64)
    ranks[sorted(range(len(names)), key=names.__getitem__)] = np.arange(len(names))
    return ranks


def _epochs(orbits: Mapping[str, OrbitSource]) -> np.ndarray:
    epochs = [s.epoch_utc if isinstance(s, ElementSet) else np.datetime64("NaT", "ms") for s in orbits.values()]
    return np.array(epochs, "datetime64[ms]")


def _empty() -> pd.DataFrame:
    times = {"aos_utc", "los_utc", "peak_utc", "element_epoch_utc"}
    words = {"window_id", "spacecraft", "antenna", "site", "clipped"}
    kinds = {c: "datetime64[ms]" if c in times else "str" if c in words else "float64" for c in COLUMNS}
    return pd.DataFrame({c: pd.Series(dtype=kind) for c, kind in kinds.items()})
