"""Plan 100 low-orbit objects of a real element file over 12 invented antennas, and print what it took.

    python tests/benchmarks/hundred.py ELEMENTS.tle --start 2021-09-18T00:00:00Z [--spacecraft 100] [--keep DIR]

The network (radios, storage, antennas) is made up here and written as an ordinary config, so that the run
goes through the same door as any other. Beside the plan stands what a planner by hand would get on the same
options: the longest contact first, and the highest pass first.
"""

from __future__ import annotations

import argparse
import json
import resource
import tempfile
import time
from pathlib import Path

import numpy as np

from passplan.inputs.elements.read import read_elements
from passplan.inputs.errors import Findings
from passplan.inputs.load import load_run
from passplan.inputs.reader import Reader
from passplan.planning.occupancy import Occupancy
from passplan.planning.plan import build_problem
from passplan.planning.problem import Problem
from passplan.planning.rules import all_terms
from passplan.planning.steps import links_of, plan_run, windows_of
from passplan.planning.value import Account, account

SITES = (
    ("Isvarde", 69.3, 16.8), ("Tarrow Mesa", 34.3, -106.7), ("Cape Orrin", -33.7, 24.9), ("Port Ellery", -45.6, 169.2),
    ("Lamvik", 63.1, -51.4), ("Sorrel Bay", 8.6, -79.1),
)
LOW_ORBIT_REV_PER_DAY = 11.25


def write_network(folder: Path, elements: Path, numbers: list[int], start: str, seconds: float) -> Path:
    """Config, fleet and ground in ``folder``; returns the config."""
    rng = np.random.default_rng(20270309)
    craft = ["name,catalogue_number,radios,weight,generation_mb_per_s,storage_mb,start_fill_mb"]
    for i, number in enumerate(numbers):
        generation = rng.uniform(0.1, 0.6)
        storage = generation * 86_400 * rng.uniform(0.12, 0.25)
        craft.append(f"S{i + 1:03d},{number},x-{i % 4},{rng.choice([1, 2, 5])},{generation:.4f},{storage:.0f},"
                     f"{0.4 * storage:.0f}")
    (folder / "spacecraft.csv").write_text("\n".join(craft) + "\n", encoding="utf-8")
    radios = ["name,direction,frequency_mhz,polarisation,eirp_dbw,symbol_rate_msps,modcods,acquisition_s"]
    radios += [f"x-{k},downlink,{8075 + 80 * k},RHCP,9,45,QPSK 3/5;QPSK 3/4;8PSK 2/3;8PSK 3/4;16APSK 2/3;16APSK 3/4,25"
               for k in range(4)]
    (folder / "radios.csv").write_text("\n".join(radios) + "\n", encoding="utf-8")
    (folder / "fleet.toml").write_text('radio = "radios.csv"\nspacecraft = "spacecraft.csv"\n', encoding="utf-8")
    ground = ['[[receiver]]\nname = "x"\nlow_mhz = 8025\nhigh_mhz = 8400\npolarisations = ["RHCP"]\n'
              "g_over_t_db_per_k = 30\n"]
    for k, (site, latitude, longitude) in enumerate(SITES):
        ground.append(f'[[site]]\nname = "{site}"\nlatitude_deg = {latitude}\nlongitude_deg = {longitude}\n'
                      f"height_m = {50 * (k + 1)}\n")
        ground += [f'[[antenna]]\nname = "{site}-{side}"\nsite = "{site}"\nreceivers = ["x"]\n'
                   f"min_elevation_deg = {5 + 2 * (side == 'B')}\nprepare_s = 60\nrelease_s = 30\n" for side in "AB"]
    (folder / "ground.toml").write_text("\n".join(ground), encoding="utf-8")
    config = folder / "hundred.toml"
    config.write_text(
        f'name = "hundred"\nstart = {start}\nhours = 24\nfleet = "fleet.toml"\nground = "ground.toml"\n'
        f'elements = "{elements.resolve()}"\n\n[policy]\nmin_contact_s = 150\ngap = 0.005\n'
        f"time_limit_s = {seconds}\nelement_refuse_age_days = 30\nelement_warn_age_days = 10\n", encoding="utf-8")
    return config


def by_hand(problem: Problem, order: np.ndarray) -> Account:
    """Take options in ``order`` as long as they fit, as a planner with a list and a pencil would."""
    occupancy = Occupancy(all_terms(problem), len(problem.options))
    chosen = []
    for option in order.tolist():
        if occupancy.fits(option):
            occupancy.add(option)
            chosen.append(option)
    return account(problem, chosen)


def main() -> None:
    """Plan, and print a table and a last line of JSON."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("elements", type=Path)
    parser.add_argument("--start", default="2021-09-18T00:00:00Z")
    parser.add_argument("--spacecraft", type=int, default=100)
    parser.add_argument("--seconds", type=float, default=90.0)
    parser.add_argument("--keep", type=Path)
    arguments = parser.parse_args()
    began = time.perf_counter()
    findings = Findings()
    sets = read_elements(arguments.elements, Reader(arguments.elements.parent), findings)
    low = [s for s in sets if s.satrec.no_kozai * 1440 / (2 * np.pi) > LOW_ORBIT_REV_PER_DAY and s.satrec.ecco < 0.1]
    numbers = list(dict.fromkeys(s.catalogue_number for s in low if s.catalogue_number))[: arguments.spacecraft]
    with tempfile.TemporaryDirectory() as scratch:
        folder = arguments.keep or Path(scratch)
        folder.mkdir(parents=True, exist_ok=True)
        run = load_run(write_network(folder, arguments.elements, numbers, arguments.start, arguments.seconds))
        record = plan_run(run)
        took_s = time.perf_counter() - began
        peak_mb = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
        windows = windows_of(run)
        problem, _ = build_problem(run, windows, links_of(run, windows))
    options = problem.options
    length = options.end_s - options.start_s
    peak = windows["peak_elevation_deg"].to_numpy()[options.window]
    hands = {"longest first": by_hand(problem, np.lexsort((options.start_s, -length))),
             "highest first": by_hand(problem, np.lexsort((-length, -peak)))}
    summary = record.summary
    size = f"{len(run.orbits)} spacecraft x {len(run.antennas)} antennas"
    print(f"{size}: {len(windows)} windows, {len(options)} options")
    print(f"{'':14} {'value':>12} {'delivered MB':>13} {'lost MB':>10} {'spilling':>9}")
    lost = {name: store["lost_mb"] for name, store in summary["storage"].items()}
    print(f"{'plan':14} {summary['value']:12.0f} {summary['volume_mb']:13.0f} {sum(lost.values()):10.0f} "
          f"{sum(x > 0.001 for x in lost.values()):9d}")
    for name, found in hands.items():
        print(f"{name:14} {found.value:12.0f} {found.delivered_mb.sum():13.0f} {found.lost_mb.sum():10.0f} "
              f"{int((found.lost_mb > 0.001).sum()):9d}")
    print(f"bound {summary['bound']:.0f}, gap {100 * summary['gap']:.3f} %, {summary['status']}, "
          f"path {summary['path']}; "
          f"{took_s:.1f} s from reading to audit, peak {peak_mb:.0f} MB")
    print(json.dumps({
        "value": summary["value"], "bound": summary["bound"], "gap": summary["gap"], "seconds": round(took_s, 2),
        "stages": summary["seconds"], "peak_mb": round(peak_mb), "contacts": summary["contacts"],
        "hand_longest": hands["longest first"].value, "hand_highest": hands["highest first"].value,
        "hand_spilling": {k: int((v.lost_mb > 0.001).sum()) for k, v in hands.items()},
    }))


if __name__ == "__main__":
    main()
