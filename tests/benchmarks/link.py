"""Links of 30 000 windows: how long, how many samples a second, and how that compares with the bare package.

    python tests/benchmarks/link.py [--windows 30000]

An invented network of 300 spacecraft and 20 antennas; passes over a circular orbit, sampled every 10 s. The
baseline calls the propagation package once per window on the same samples, which is what a cache-less budget
would do; it is timed on a few hundred windows and scaled. The last line is JSON.
"""

from __future__ import annotations

import argparse
import json
import resource
import time

import numpy as np
import pandas as pd

from passplan.geometry.pointing import Samples
from passplan.inputs.fleet import CommandRadio, DownlinkRadio, Spacecraft
from passplan.inputs.ground import Antenna, Receiver, Site, Transmitter
from passplan.inputs.modcods import builtin_table
from passplan.inputs.policy import Policy
from passplan.inputs.run import Run
from passplan.link.profiles import link_profiles

CRAFT, ANTENNAS = 300, 20
EARTH_KM, ORBIT_KM = 6_371.0, 6_971.0
BASELINE_WINDOWS = 300


def network() -> Run:
    """Five kinds of X-band radio and one command radio over twenty antennas."""
    radios: dict[str, DownlinkRadio | CommandRadio] = {
        f"x-{k}": DownlinkRadio(
            name=f"x-{k}", direction="downlink", frequency_mhz=8_100.0 + 40.0 * k, polarisation="RHCP",
            eirp_dbw=8.0 + k, symbol_rate_msps=40.0 + 5.0 * k,
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
            f"S{i:03d}": Spacecraft(name=f"S{i:03d}", catalogue_number=i + 1, radios=(f"x-{i % 5}", "up"))
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
            "rx": Receiver(name="rx", low_mhz=8_025, high_mhz=8_400, polarisations=("RHCP",), g_over_t_db_per_k=30.0)
        },
        transmitters={
            "tx": Transmitter(name="tx", low_mhz=2_025, high_mhz=2_110, polarisations=("RHCP",), eirp_dbw=48.0)
        },
        modcod_tables={"dvb-s2": builtin_table("dvb-s2")}, closures=(), requests=(), policy=Policy(), orbits={},
        left_out={}, elements=pd.DataFrame(),
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


def baseline_samples_per_s(samples: Samples) -> float:
    """Samples per second of the propagation package called once per window."""
    from itur.models.itu676 import gaseous_attenuation_slant_path

    began, done = time.perf_counter(), 0
    for i in range(min(BASELINE_WINDOWS, samples.offsets.size - 1)):
        elevation = np.maximum(samples.elevation_deg[samples.offsets[i] : samples.offsets[i + 1]], 5.0)
        gaseous_attenuation_slant_path(8.2, elevation, 7.5, 1_013.25, 288.15, mode="approx")
        done += elevation.size
    return done / (time.perf_counter() - began)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--windows", type=int, default=30_000)
    run, (windows, samples) = network(), passes(parser.parse_args().windows)
    link_profiles(run, windows.iloc[:1], samples)
    began = time.perf_counter()
    links = link_profiles(run, windows, samples)
    profiles_s = time.perf_counter() - began
    began, calls = time.perf_counter(), 0
    for i, link in enumerate(links):
        first, last = int(samples.time_s[samples.offsets[i]]) + 1, int(samples.time_s[samples.offsets[i + 1] - 1])
        for share in (1.0, 0.7, 0.4):
            if link.downlink is not None:
                link.downlink.best(first, first + int(share * (last - first)))
                calls += 1
    best_s = time.perf_counter() - began
    # Each window has a downlink and a command chain.
    chain_samples = 2 * int(samples.offsets[-1])
    bare = baseline_samples_per_s(samples)
    figures = {
        "windows": len(windows), "samples": int(samples.offsets[-1]), "link_samples": chain_samples,
        "profiles_s": round(profiles_s, 3), "link_samples_per_s": round(chain_samples / profiles_s),
        "package_samples_per_s": round(bare), "times_faster": round(chain_samples / profiles_s / bare, 1),
        "best_calls": calls, "best_us": round(1e6 * best_s / max(calls, 1), 1),
        "peak_mb": round(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024),
    }
    for name, value in figures.items():
        print(f"{name:24s} {value:>14}")
    print(json.dumps(figures))


if __name__ == "__main__":
    main()
