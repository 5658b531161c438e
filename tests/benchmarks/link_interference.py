"""Who must not send at once: 300 spacecraft on one frequency over 20 antennas for 24 h, and a plain baseline.

The orbits are real element sets, everything else is invented. The plain way takes each window with each other
spacecraft, points at both every 10 s and works out C/I; it is timed on some of them and scaled to all.
"""

from __future__ import annotations

import resource
import time
from pathlib import Path

import numpy as np
import pandas as pd

from passplan.geometry.motion import spacecraft_separation_deg
from passplan.geometry.pointing import look_angles
from passplan.geometry.windows import find_windows
from passplan.inputs.elements.tle import parse_tle
from passplan.inputs.errors import Findings
from passplan.inputs.fleet import DownlinkRadio, Spacecraft
from passplan.inputs.ground import Antenna, Receiver, Site
from passplan.inputs.modcods import builtin_table
from passplan.inputs.policy import Policy
from passplan.inputs.run import Run
from passplan.link.chains import chains_between
from passplan.link.conflicts import find_interference
from passplan.link.interference import c_over_i_db

CRAFT, ANTENNAS, REQUIRED_DB = 300, 20, 15.0
BASELINE_PAIRS = 1_000


def one_frequency(elements: Path) -> Run:
    """The first 300 objects of a file of element sets, all with the same radio."""
    sets = parse_tle(elements.read_text(), str(elements), Findings())[:CRAFT]
    start = np.datetime64(max(entry.epoch_utc for entry in sets), "D").astype("datetime64[ms]")
    names = [f"S{k:03d}" for k in range(len(sets))]
    radio = DownlinkRadio(
        name="x", direction="downlink", frequency_mhz=8_200.0, polarisation="RHCP", eirp_dbw=9.0, symbol_rate_msps=45.0)
    dish = Receiver(
        name="rx", low_mhz=8_000, high_mhz=8_400, polarisations=("RHCP",), gain_dbi=50.1, noise_temperature_k=120.0)
    latitudes = np.degrees(np.arcsin(np.linspace(-0.95, 0.95, ANTENNAS)))
    return Run(
        name="bench", start_utc=start, end_utc=start + np.timedelta64(24, "h"),
        spacecraft={name: Spacecraft(name=name, catalogue_number=k + 1, radios=("x",)) for k, name in enumerate(names)},
        radios={"x": radio},
        sites={
            f"P{j}": Site(name=f"P{j}", latitude_deg=float(latitudes[7 * j % ANTENNAS]), longitude_deg=18.0 * j - 180.0)
            for j in range(ANTENNAS)
        },
        antennas={f"A{j}": Antenna(name=f"A{j}", site=f"P{j}", receivers=("rx",)) for j in range(ANTENNAS)},
        receivers={"rx": dish}, transmitters={}, modcod_tables={"dvb-s2": builtin_table("dvb-s2")}, closures=(),
        requests=(), policy=Policy(required_c_over_i_db=REQUIRED_DB), orbits=dict(zip(names, sets, strict=True)),
        left_out={}, elements=pd.DataFrame(),
    )


def plain_s(run: Run, windows: pd.DataFrame) -> float:
    """Core seconds of the plain way over all windows, from some of them."""
    rng = np.random.default_rng(1)
    names, began = list(run.orbits), time.process_time()
    for row in rng.integers(0, len(windows), BASELINE_PAIRS).tolist():
        window = windows.iloc[row]
        site = run.sites[window["site"]]
        other = names[int(rng.integers(0, len(names)))]
        times = np.arange(window["aos_utc"].to_datetime64(), window["los_utc"].to_datetime64(), np.timedelta64(10, "s"))
        wanted, seen = (run.orbits[name] for name in (window["spacecraft"], other))
        apart_deg = spacecraft_separation_deg(wanted, seen, site, times)
        looks = (look_angles(wanted, site, times), look_angles(seen, site, times))
        c_over_i_db(run, chains_between(run, window["spacecraft"], window["antenna"])[0], other, site, looks, apart_deg)
    return (time.process_time() - began) / BASELINE_PAIRS * len(windows) * (len(names) - 1)


def interference_figures(elements: Path) -> dict[str, float]:
    """Core seconds of the search and of the plain way, what was found, and the peak of memory [MB]."""
    run = one_frequency(elements)
    windows = find_windows(run.orbits, run.antennas, run.sites, run.start_utc, run.end_utc)
    began = time.process_time()
    found = find_interference(run, windows)
    core_s = time.process_time() - began
    plain = plain_s(run, windows)
    return {
        "interference_windows": len(windows), "interference_pairs": len(found.pairs),
        "interference_crowds": len(found.crowds), "interference_core_s": round(core_s, 2),
        "interference_plain_core_s": round(plain), "interference_times_faster": round(plain / core_s, 1),
        "interference_peak_mb": round(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024),
    }
