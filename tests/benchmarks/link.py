"""Links of 30 000 windows with weather: how long, how many samples a second, and against the bare package.

    python tests/benchmarks/link.py [--windows 30000] [--percent 0.1] [--interference ELEMENTS.tle]

An invented network of 300 spacecraft and 20 antennas; passes over a circular orbit, sampled every 10 s. The chain
is the whole one: rain, cloud, scintillation, gas, sky noise and free space, from cached tables. The baseline calls
the propagation package once per window on the same samples, which is what a budget without tables would do; it
is timed on a few hundred windows and scaled. Accuracy is the worst difference of the tables from the package at
elevations above 3 deg, on the samples of those windows. ``sun_s`` is the same with the Sun's noise counted. With
``--interference`` also: who must not send at once, see ``link_interference.py``. The last line is JSON.
"""

from __future__ import annotations

import argparse
import json
import resource
import time
import warnings
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
from link_interference import interference_figures

from passplan.geometry.pointing import Samples
from passplan.inputs.fleet import CommandRadio, DownlinkRadio, Spacecraft
from passplan.inputs.ground import Antenna, Receiver, Site, Transmitter
from passplan.inputs.modcods import builtin_table
from passplan.inputs.policy import Policy
from passplan.inputs.run import Run
from passplan.link.atmosphere import gas_attenuation_db, skies
from passplan.link.chains import chains_between
from passplan.link.profiles import link_profiles
from passplan.link.slant import GRID_DEG, look_up, sky_path

CRAFT, ANTENNAS = 300, 20
EARTH_KM, ORBIT_KM = 6_371.0, 6_971.0
BASELINE_WINDOWS = 300


def network(percent: float | None) -> Run:
    """Five kinds of Ka-band radio and one command radio over twenty antennas."""
    radios: dict[str, DownlinkRadio | CommandRadio] = {
        f"ka-{k}": DownlinkRadio(
            name=f"ka-{k}", direction="downlink", frequency_mhz=26_000.0 + 100.0 * k, polarisation="RHCP",
            eirp_dbw=20.0 + k, symbol_rate_msps=40.0 + 5.0 * k,
        )
        for k in range(5)
    }
    radios["up"] = CommandRadio(
        name="up", direction="command", frequency_mhz=2_050.0, polarisation="RHCP", g_over_t_db_per_k=-28.0,
        bit_rate_kbps=64.0,
    )
    return Run(
        name="bench", start_utc=np.datetime64("2027-03-09", "ms"), end_utc=np.datetime64("2027-03-10", "ms"),
        spacecraft={
            f"S{i:03d}": Spacecraft(name=f"S{i:03d}", catalogue_number=i + 1, radios=(f"ka-{i % 5}", "up"))
            for i in range(CRAFT)
        },
        radios=radios,
        sites={
            f"P{j}": Site(name=f"P{j}", latitude_deg=4.0 * j, longitude_deg=9.0 * j, height_m=50.0 * j)
            for j in range(ANTENNAS)
        },
        antennas={
            f"A{j}": Antenna(name=f"A{j}", site=f"P{j}", receivers=("rx",), transmitters=("tx",))
            for j in range(ANTENNAS)
        },
        receivers={
            "rx": Receiver(
                name="rx", low_mhz=25_500, high_mhz=27_000, polarisations=("RHCP",), gain_dbi=61.2, diameter_m=5.4,
                receiver_noise_k=130.0, spill_over_k=8.0, feeder_loss_db=0.2,
            )
        },
        transmitters={
            "tx": Transmitter(name="tx", low_mhz=2_025, high_mhz=2_110, polarisations=("RHCP",), eirp_dbw=48.0)
        },
        modcod_tables={"dvb-s2": builtin_table("dvb-s2")}, closures=(), requests=(),
        policy=Policy(unavailability_percent=percent), orbits={}, left_out={}, elements=pd.DataFrame(),
    )


def passes(count: int) -> tuple[pd.DataFrame, Samples]:
    """Passes of random length and height, by the spherical triangle of station, spacecraft and Earth's centre."""
    rng = np.random.default_rng(20270309)
    times, elevations, ranges = [], [], []
    for _ in range(count):
        duration_s, start_s, aside = rng.uniform(200.0, 720.0), rng.uniform(0.0, 80_000.0), rng.uniform(0.0, 0.25)
        time_s = np.append(np.arange(0.0, duration_s, 10.0), duration_s)
        angle = np.hypot((time_s - duration_s / 2.0) * 1.08e-3, aside)
        distance = np.sqrt(EARTH_KM**2 + ORBIT_KM**2 - 2.0 * EARTH_KM * ORBIT_KM * np.cos(angle))
        sine = (ORBIT_KM**2 - EARTH_KM**2 - distance**2) / (2.0 * EARTH_KM * distance)
        times.append(start_s + time_s)
        elevations.append(np.degrees(np.arcsin(sine)))
        ranges.append(distance)
    offsets = np.concatenate(([0], np.cumsum([time_s.size for time_s in times])))
    nothing = np.zeros(offsets[-1])
    windows = pd.DataFrame({
        "spacecraft": [f"S{i:03d}" for i in rng.integers(0, CRAFT, count)],
        "antenna": [f"A{j}" for j in rng.integers(0, ANTENNAS, count)],
    })
    return windows, Samples(
        np.concatenate(times), nothing, np.concatenate(elevations), np.concatenate(ranges), nothing, offsets
    )


def baseline(run: Run, windows: pd.DataFrame, samples: Samples, percent: float) -> tuple[float, float]:
    """Samples per core second of the package called once per window, and the worst difference of the tables [dB].

    The package gets what the tables hold of the site (rain rate, vapour, pressure), so that it looks nothing up.
    """
    import itur

    from passplan.link.atmosphere import surface_weather

    spent_s, done, worst_db = 0.0, 0, 0.0
    for i in range(min(BASELINE_WINDOWS, len(windows))):
        craft, antenna = windows["spacecraft"].iloc[i], windows["antenna"].iloc[i]
        chain = chains_between(run, craft, antenna)[0]
        path = sky_path(run, antenna, chain)
        sky, site = skies([path])[path], path.site
        constants = sky.constants
        assert constants is not None
        elevation, air = samples.elevation_deg[samples.offsets[i] : samples.offsets[i + 1]], surface_weather(site)
        began = time.process_time()
        with warnings.catch_warnings(), np.errstate(all="ignore"):
            warnings.simplefilter("ignore")
            parts = itur.atmospheric_attenuation_slant_path(
                site.latitude_deg, site.longitude_deg, chain.frequency_mhz / 1e3, elevation, percent, path.diameter_m,
                hs=site.height_m / 1e3, rho=constants.vapour_density_g_per_m3, R001=constants.rain_rate_mm_per_h,
                eta=path.efficiency, P=air.pressure_hpa, T=air.temperature_k - 273.15,
                V_t=constants.vapour_column_kg_per_m2, H=None, tau=45, return_contributions=True,
            )
        spent_s += time.process_time() - began
        done += elevation.size
        # P.618 has a step of its own at 5 and at 25 deg, which the tables bridge within 0.02 deg.
        fair = (elevation > 3.0) & (np.abs(elevation - 5.0) > 0.02) & (np.abs(elevation - 25.0) > 0.02)
        if np.any(fair):
            table = look_up(sky.at(GRID_DEG).total_db[None, :], np.zeros(elevation.size, np.int64), elevation)
            _, cloud, rain, scintillation, _ = (np.asarray(part.value) for part in parts)
            direct = gas_attenuation_db(sky.gas, elevation) + np.hypot(rain + cloud, scintillation)
            worst_db = max(worst_db, float(np.max(np.abs(table - direct)[fair])))
    return done / spent_s, worst_db


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--windows", type=int, default=30_000)
    parser.add_argument("--percent", type=float, default=0.1)
    parser.add_argument("--interference", metavar="ELEMENTS", type=Path)
    arguments = parser.parse_args()
    run, (windows, samples) = network(arguments.percent), passes(arguments.windows)
    began = time.perf_counter()
    link_profiles(run, windows, samples)
    first_s = time.perf_counter() - began
    before_mb = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    began, worked = time.perf_counter(), time.process_time()
    links = link_profiles(run, windows, samples)
    profiles_s, core_s = time.perf_counter() - began, time.process_time() - worked
    began, calls = time.perf_counter(), 0
    for i, link in enumerate(links):
        first, last = int(samples.time_s[samples.offsets[i]]) + 1, int(samples.time_s[samples.offsets[i + 1] - 1])
        for share in (1.0, 0.7, 0.4):
            if link.downlink is not None:
                link.downlink.best(first, first + int(share * (last - first)))
                calls += 1
    best_s = time.perf_counter() - began
    sunny = replace(run, policy=run.policy.model_copy(update={"sun_noise": True}))
    began = time.process_time()
    link_profiles(sunny, windows, samples)
    sun_s = time.process_time() - began
    # Each window has a downlink and a command chain.
    chain_samples = 2 * int(samples.offsets[-1])
    peak_mb = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    bare, worst_db = baseline(run, windows, samples, arguments.percent)
    figures = {
        "windows": len(windows), "samples": int(samples.offsets[-1]), "link_samples": chain_samples,
        "first_call_s": round(first_s, 3), "profiles_s": round(profiles_s, 3), "profiles_core_s": round(core_s, 3),
        "link_samples_per_core_s": round(chain_samples / core_s),
        "sun_core_s": round(sun_s, 3), "package_samples_per_core_s": round(bare),
        "times_faster": round(chain_samples / core_s / bare, 1),
        "best_calls": calls, "best_us": round(1e6 * best_s / max(calls, 1), 1),
        "worst_table_db": round(worst_db, 5), "peak_mb_first_call": round(before_mb), "peak_mb": round(peak_mb),
    }
    if arguments.interference is not None:
        figures.update(interference_figures(arguments.interference))
    for name, value in figures.items():
        print(f"{name:32s} {value:>14}")
    print(json.dumps(figures))


if __name__ == "__main__":
    main()
