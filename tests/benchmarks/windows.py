"""Speed, memory and truth of the windows search, with its yardsticks measured in the same run.

    python tests/benchmarks/windows.py ELEMENTS.tle --start 2021-09-18T00:00:00Z --objects 300 --antennas 20 --hours 24

The figures come as a table and, for machines, as one JSON object in the last line. The search is timed up to
the whole windows table. Yardsticks: Skyfield's ``find_events`` on random pairs, scaled to all pairs, and
raw SGP4 (``SatrecArray.sgp4``) of the same objects on a 60 s grid. ``--check N`` compares N random pairs of all
regimes with 1 s sampling by Skyfield, refined near the mask, at masks 0, 5, 30, 60 and 80 deg in turn. ``--mounts``
gives every antenna a mount (rates, accelerations, cables; azimuth-elevation and X-Y) and times what that adds; its
yardstick is a look at every window, sampled by SGP4 every half second, measured on random windows and scaled.
"""

from __future__ import annotations

import argparse
import json
import math
import resource
import sys
import time
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from sgp4.api import WGS72, Satrec, SatrecArray
from skyfield.api import EarthSatellite, wgs84

from passplan.geometry.axes import axis_angles_deg
from passplan.geometry.keyhole import Axis, lost_stretches
from passplan.geometry.pointing import sample_windows
from passplan.geometry.regimes import orbit_class
from passplan.geometry.survey import Ground, cut_by_travel, find_losses
from passplan.geometry.timescale import julian_day, timescale, utc_seconds
from passplan.geometry.travel import choose_branch, unwrapped_deg
from passplan.geometry.windows import find_windows
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.elements.tle import parse_tle
from passplan.inputs.errors import Findings
from passplan.inputs.ground import Antenna, Site
from passplan.inputs.mounts import Mount

Floats = NDArray[np.float64]

GROWTH = ((100, 10, 24), (300, 10, 24), (300, 20, 24), (1_000, 20, 24), (1_000, 50, 24), (100, 10, 168))
MASKS_DEG = (0.0, 5.0, 30.0, 60.0, 80.0)
MOUNTS = {
    mount.name: mount
    for mount in (
        Mount(name="heavy", kind="az_el", lower_rate_deg_s=5.0, upper_rate_deg_s=3.0, lower_acceleration_deg_s2=2.0,
              upper_acceleration_deg_s2=2.0, lower_from_deg=-270.0, lower_to_deg=270.0),
        Mount(name="light", kind="az_el", lower_rate_deg_s=10.0, upper_rate_deg_s=5.0),
        Mount(name="cradle", kind="x_y", lower_rate_deg_s=3.0, upper_rate_deg_s=3.0),
        Mount(name="tied", kind="az_el", lower_rate_deg_s=3.0, upper_rate_deg_s=2.0, lower_from_deg=-200.0,
              lower_to_deg=200.0, upper_from_deg=0.0, upper_to_deg=90.0),
    )
}  # fmt: skip
SGP4_DAY_ZERO_JD = 2_433_281.5


def main() -> None:
    options = _options()
    start = np.datetime64(options.start.removesuffix("Z"), "ms")
    findings = Findings()
    sets = parse_tle(options.elements.read_text(), options.elements, findings)
    findings.raise_if_any()
    low = [s for s in sets if orbit_class(s.satrec.no_kozai / 60.0, s.satrec.ecco) == "low"]
    ground = _ground(max(50, options.antennas), options.mask)
    find_windows({"warm": low[0]}, *_part(ground, 1), start, start + np.timedelta64(6, "h"))
    imports_mb = _peak_mb()
    # First, in a fresh process: what larger cases leave of the heap slows the search by a few percent.
    figures = _against_yardsticks(low, ground, start, options)
    growth = [_timed(low, ground, start, *size) for size in GROWTH]
    figures |= {"memory_above_imports_mb": _peak_mb() - imports_mb, "growth": growth}
    if options.mounts:
        figures["mounts"] = _with_mounts(low, ground, start, options)
    if options.check:
        figures["check"] = _check(sets, start, options.hours, options.check)
    _show(figures)
    print(json.dumps(figures))


def _options() -> argparse.Namespace:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("elements", type=Path, help="element sets, TLE")
    parser.add_argument("--start", required=True, help="start of the horizon, UTC")
    parser.add_argument("--objects", type=int, default=300, help="low-orbit objects, copied where the file has fewer")
    parser.add_argument("--antennas", type=int, default=20)
    parser.add_argument("--hours", type=int, default=24)
    parser.add_argument("--mask", type=float, default=5.0, help="elevation mask, deg")
    parser.add_argument("--pairs", type=int, default=300, help="pairs for the find_events yardstick")
    parser.add_argument("--repeats", type=int, default=7, help="the best of so many runs counts, for both sides")
    parser.add_argument("--check", type=int, default=0, help="pairs to compare with dense sampling")
    parser.add_argument("--mounts", action="store_true", help="also every antenna on a mount")
    return parser.parse_args()


def _ground(count: int, mask_deg: float, seed: int = 1) -> tuple[dict[str, Antenna], dict[str, Site]]:
    """Invented sites spread evenly over the sphere, one antenna each."""
    random = np.random.default_rng(seed)
    sites, antennas = {}, {}
    for i in range(count):
        latitude = math.degrees(math.asin(random.uniform(-0.95, 0.95)))
        name = f"site-{i:03d}"
        sites[name] = Site(
            name=name,
            latitude_deg=latitude,
            longitude_deg=random.uniform(-180.0, 180.0),
            height_m=random.uniform(0.0, 2_000.0),
        )
        antennas[f"dish-{i:03d}"] = Antenna(name=f"dish-{i:03d}", site=name, min_elevation_deg=mask_deg)
    return antennas, sites


def _part(ground: tuple[dict[str, Antenna], dict[str, Site]], count: int) -> tuple[dict[str, Antenna], dict[str, Site]]:
    return dict(list(ground[0].items())[:count]), ground[1]


def _fleet(sets: list[ElementSet], count: int) -> dict[str, ElementSet]:
    """``count`` objects: those of the file, then copies with node and anomaly turned by golden angles."""
    fleet = {}
    for i in range(count):
        original, turn = sets[i % len(sets)], i // len(sets)
        fleet[f"craft-{i:04d}"] = original if turn == 0 else _turned(original, 2.399963 * turn)
    return fleet


def _turned(original: ElementSet, angle_rad: float) -> ElementSet:
    old, new = original.satrec, Satrec()
    epoch = old.jdsatepoch - SGP4_DAY_ZERO_JD + old.jdsatepochF
    node, anomaly = (old.nodeo + angle_rad) % math.tau, (old.mo + 1.7 * angle_rad) % math.tau
    rest = (old.ecco, old.argpo, old.inclo, anomaly, old.no_kozai, node)
    new.sgp4init(WGS72, "i", 0, epoch, old.bstar, old.ndot, old.nddot, *rest)
    return replace(original, satrec=new)


def _best_s(run: Callable[[], object], repeats: int) -> float:
    best = math.inf
    for _ in range(repeats):
        begun = time.perf_counter()
        run()
        best = min(best, time.perf_counter() - begun)
    return best


def _timed(
    sets: list[ElementSet], ground: Any, start: np.datetime64, objects: int, antennas: int, hours: int
) -> dict[str, float]:
    fleet, end = _fleet(sets, objects), start + np.timedelta64(hours, "h")
    part = _part(ground, antennas)
    found: list[pd.DataFrame] = []

    def run() -> None:
        found[:] = [find_windows(fleet, *part, start, end)]

    seconds = _best_s(run, 2)
    return {"objects": objects, "antennas": antennas, "hours": hours, "windows": len(found[0]), "seconds": seconds}


def _against_yardsticks(
    sets: list[ElementSet], ground: Any, start: np.datetime64, options: argparse.Namespace
) -> dict[str, Any]:
    fleet, end = _fleet(sets, options.objects), start + np.timedelta64(options.hours, "h")
    part = _part(ground, options.antennas)
    grid = julian_day(float(utc_seconds(start)) + 60.0 * np.arange(options.hours * 60 + 1.0))
    raw = SatrecArray([source.satrec for source in fleet.values()])
    search_s, sgp4_s = math.inf, math.inf
    # Turn and turn about, so that a busy minute of the machine hits both.
    for _ in range(options.repeats):
        sgp4_s = min(sgp4_s, _best_s(lambda: raw.sgp4(*grid), 1))
        search_s = min(search_s, _best_s(lambda: find_windows(fleet, *part, start, end), 1))
    pair_s = _find_events_s(fleet, part, start, options)
    events_s = pair_s * options.objects * options.antennas
    return {
        "objects": options.objects,
        "antennas": options.antennas,
        "hours": options.hours,
        "mask_deg": options.mask,
        "windows": len(find_windows(fleet, *part, start, end)),
        "search_s": search_s,
        "sgp4_60s_grid_s": sgp4_s,
        "find_events_scaled_s": events_s,
        "times_faster_than_find_events": events_s / search_s,
        "times_the_cost_of_sgp4": search_s / sgp4_s,
    }


def _find_events_s(fleet: dict[str, ElementSet], part: Any, start: np.datetime64, options: argparse.Namespace) -> float:
    """Mean seconds of ``find_events`` per pair, on random pairs."""
    antennas, sites = part
    random = np.random.default_rng(7)
    begin = _skyfield_instants(start, np.array([0.0, 3_600.0 * options.hours]))
    sources, dishes = list(fleet.values()), list(antennas.values())
    pairs = []
    for _ in range(options.pairs):
        source, site = random.choice(len(sources)), sites[dishes[random.choice(len(dishes))].site]
        pairs.append((EarthSatellite.from_satrec(sources[source].satrec, timescale()), _place(site)))
    begun = time.perf_counter()
    for satellite, place in pairs:
        satellite.find_events(place, begin[0], begin[1], altitude_degrees=options.mask)
    return (time.perf_counter() - begun) / max(len(pairs), 1)


def _with_mounts(
    sets: list[ElementSet], ground: Any, start: np.datetime64, options: argparse.Namespace
) -> dict[str, Any]:
    """What mounts cost beside the search itself, and what looking at every window closely would."""
    fleet, end = _fleet(sets, options.objects), start + np.timedelta64(options.hours, "h")
    plain, sites = _part(ground, options.antennas)
    kinds = list(MOUNTS)
    antennas = {
        name: antenna.model_copy(update={"mount": kinds[k % len(kinds)], "beamwidth_deg": 0.5})
        for k, (name, antenna) in enumerate(plain.items())
    }
    every = Ground(antennas, sites, MOUNTS, dict.fromkeys(antennas, 0.125))
    table = find_windows(fleet, antennas, sites, start, end, mounts=MOUNTS)
    found: list[Any] = []

    def survey() -> None:
        cut = cut_by_travel(table, fleet, every)
        found[:] = [cut, find_losses(cut, fleet, every, start)]

    survey_s = _best_s(survey, 2)
    random = np.random.default_rng(5)
    some = table.iloc[np.sort(random.choice(len(table), min(500, len(table)), replace=False))]
    close_s = _best_s(lambda: _all_closely(some, fleet, every), 1) * len(table) / len(some)
    return {
        "windows": len(table), "survey_s": survey_s, "every_window_closely_s": close_s,
        "times_faster": close_s / survey_s, "stretches_lost": len(found[1].rows),
        "seconds_lost": float(found[1].lost_seconds(len(found[0])).sum()),
    }  # fmt: skip


def _all_closely(table: pd.DataFrame, fleet: dict[str, ElementSet], ground: Ground) -> None:
    """Cables and rates of every window on samples half a second apart."""
    samples = sample_windows(table, fleet, ground.sites, np.datetime64("2000-01-01", "ms"), 0.5)
    for k, name in enumerate(table["antenna"]):
        own = slice(samples.offsets[k], samples.offsets[k + 1])
        mount, time_s = MOUNTS[str(ground.antennas[name].mount)], samples.time_s[own]
        lower, upper = axis_angles_deg(mount, samples.azimuth_deg[own], samples.elevation_deg[own])
        choose_branch(mount, time_s, unwrapped_deg(samples.azimuth_deg[own]))
        first = Axis(mount.lower_rate_deg_s or np.inf, mount.lower_acceleration_deg_s2 or np.inf)
        second = Axis(mount.upper_rate_deg_s or np.inf, mount.upper_acceleration_deg_s2 or np.inf)
        lost_stretches(time_s, unwrapped_deg(lower), upper, first, 0.125)
        lost_stretches(time_s, upper, None, second, 0.125)


def _place(site: Site) -> Any:
    return wgs84.latlon(site.latitude_deg, site.longitude_deg, site.height_m)


def _skyfield_instants(start: np.datetime64, seconds: Floats) -> Any:
    day = pd.Timestamp(start)
    return timescale().utc(day.year, day.month, day.day, day.hour, day.minute, day.second + seconds)


def _check(sets: list[ElementSet], start: np.datetime64, hours: int, pairs: int) -> dict[str, Any]:
    """Windows missed and invented, and the worst disagreement of instants and peaks, over random pairs."""
    random, end = np.random.default_rng(11), start + np.timedelta64(hours, "h")
    total = {"pairs": pairs, "windows": 0, "under_10_s": 0, "missed_or_invented": 0, "grazing": 0}
    worst = {"instant_ms": 0.0, "grazing_deg": 0.0, "peak_deg": 0.0}
    for k in range(pairs):
        source, mask_deg = sets[random.choice(len(sets))], MASKS_DEG[k % len(MASKS_DEG)]
        site = Site(
            name="site",
            latitude_deg=math.degrees(math.asin(random.uniform(-1.0, 1.0))),
            longitude_deg=random.uniform(-180.0, 180.0),
            height_m=random.uniform(0.0, 3_000.0),
        )
        dish = Antenna(name="dish", site="site", min_elevation_deg=mask_deg)
        table = find_windows({"craft": source}, {"dish": dish}, {"site": site}, start, end)
        elevation = _elevation(source, site, start)
        true, peaks = _dense(elevation, mask_deg, 3_600 * hours)
        found = np.stack([(table[c].to_numpy() - start) / np.timedelta64(1, "s") for c in ("aos_utc", "los_utc")], -1)
        peak_deg = table["peak_elevation_deg"].to_numpy()
        if len(found) != len(true):
            # A pass shorter than the table's millisecond may round away.
            kept, held = true[:, 1] - true[:, 0] > 2e-3, found[:, 1] - found[:, 0] > 2e-3
            true, peaks, found, peak_deg = true[kept], peaks[kept], found[held], peak_deg[held]
        total["windows"] += len(true)
        total["under_10_s"] += int(np.sum(true[:, 1] - true[:, 0] < 10.0))
        if len(found) != len(true):
            total["missed_or_invented"] += abs(len(found) - len(true))
            continue
        apart_ms = np.abs(found - true).reshape(-1) * 1e3
        grazing = np.flatnonzero(apart_ms > 1.0)
        off = np.abs(elevation(found.reshape(-1)[grazing]) - mask_deg) if grazing.size else np.zeros(0)
        total["grazing"] += grazing.size
        worst["grazing_deg"] = max(worst["grazing_deg"], float(off.max(initial=0.0)))
        worst["instant_ms"] = max(worst["instant_ms"], float(apart_ms[apart_ms <= 1.0].max(initial=0.0)))
        worst["peak_deg"] = max(worst["peak_deg"], float(np.abs(peak_deg - peaks).max(initial=0.0)))
        if sys.stderr.isatty():
            print(f"\r{k + 1}/{pairs}", end="", file=sys.stderr)
    return total | worst


def _elevation(source: ElementSet, site: Site, start: np.datetime64) -> Callable[[Floats], Floats]:
    """Skyfield's elevation (deg) at seconds from the start. Nutation is left out: it turns both sides alike."""
    at = (EarthSatellite.from_satrec(source.satrec, timescale()) - _place(site)).at

    def elevation(seconds: Floats) -> Floats:
        instants = _skyfield_instants(start, seconds)
        instants.gast = instants.tt * 0.0
        instants.M = instants.MT = np.identity(3)
        return np.asarray(at(instants).altaz()[0].degrees, float)

    return elevation


def _dense(elevation: Callable[[Floats], Floats], mask_deg: float, length_s: int) -> tuple[Floats, Floats]:
    """Intervals above the mask (n, 2) and their peaks (n,), by 1 s samples and a finer look at every extreme."""
    seconds = np.arange(length_s + 1.0)
    level = elevation(seconds)
    turn = np.flatnonzero((np.diff(level[:-1]) > 0.0) != (np.diff(level[1:]) > 0.0)) + 1
    near = turn[level[turn] > mask_deg - 2.0]
    fine = [np.linspace(max(k - 1.0, 0.0), min(k + 1.0, length_s), 401) for k in near.tolist()]
    seconds = np.unique(np.concatenate([seconds, *fine]))
    level = elevation(seconds)
    above = level > mask_deg
    change = np.flatnonzero(above[1:] != above[:-1])
    low, high, rising = seconds[change], seconds[change + 1], above[change + 1]
    for _ in range(30 if change.size else 0):
        middle = 0.5 * (low + high)
        past = (elevation(middle) > mask_deg) == rising
        low, high = np.where(past, low, middle), np.where(past, middle, high)
    edge = 0.5 * (low + high)
    starts = np.concatenate([[0.0] if above[0] else [], edge[rising]])
    ends = np.concatenate([edge[~rising], [float(length_s)] if above[-1] else []])
    peaks = [level[(seconds >= a) & (seconds <= b)].max(initial=mask_deg) for a, b in zip(starts, ends, strict=True)]
    return np.stack([starts, ends], axis=-1), np.array(peaks)


def _peak_mb() -> float:
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1_024.0


def _show(figures: dict[str, Any]) -> None:
    print(f"{'objects':>8}{'antennas':>10}{'hours':>7}{'windows':>10}{'seconds':>9}{'us/window':>11}")
    for row in figures["growth"]:
        each = 1e6 * row["seconds"] / max(row["windows"], 1)
        sizes = f"{row['objects']:>8}{row['antennas']:>10}{row['hours']:>7}{row['windows']:>10}"
        print(f"{sizes}{row['seconds']:>9.3f}{each:>11.1f}")
    print(f"\npeak memory above the imports: {figures['memory_above_imports_mb']:.0f} MB")
    size = f"{figures['objects']} x {figures['antennas']} x {figures['hours']} h, mask {figures['mask_deg']:g} deg"
    print(f"\n{size}: {figures['windows']} windows")
    print(f"  search, to the whole table        {figures['search_s']:10.3f} s")
    print(f"  raw SGP4 on a 60 s grid           {figures['sgp4_60s_grid_s']:10.3f} s")
    print(f"  find_events, scaled to all pairs  {figures['find_events_scaled_s']:10.1f} s")
    print(f"  times faster than find_events     {figures['times_faster_than_find_events']:10.0f}")
    print(f"  times the cost of raw SGP4        {figures['times_the_cost_of_sgp4']:10.2f}")
    for name, value in figures.get("mounts", {}).items():
        print(f"  mounts: {name:<26}{value:10.6g}")
    for name, value in figures.get("check", {}).items():
        print(f"  check: {name:<27}{value:10.6g}")
    print()


if __name__ == "__main__":
    main()
