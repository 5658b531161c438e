"""Where a model is used outside its stated range, or a figure is missing, and what was assumed instead.

A notice is no fault: the budget and the report show it, and the plan is made.
"""

from __future__ import annotations

import pandas as pd

from passplan.inputs.run import Run
from passplan.link.atmosphere import LOWEST_STATED_ELEVATION_DEG, SkyPath
from passplan.link.chains import Chain, chains_between
from passplan.link.noise import dish_of
from passplan.link.slant import sky_path

STATISTICS = (
    "rain, cloud and scintillation are long-term statistics of an average year (ITU-R P.618), not a forecast"
)


def chain_notices(run: Run, chain: Chain, path: SkyPath, lowest_deg: float) -> list[str]:
    """Notices on one chain under one sky, down to an elevation [deg]."""
    found = [*_frequency(run, chain, path), *_elevation(path, lowest_deg)]
    if path.wet:
        found += _weather(run, path)
        if chain.receiver is not None:
            found += _receiver(chain)
    return found


def run_notices(run: Run, windows: pd.DataFrame) -> list[str]:
    """Notices on all links of a run, each once, with how many links it holds for."""
    lowest = {name: min(antenna.min_elevation_deg, *(e for _, e in antenna.mask)) if antenna.mask
              else antenna.min_elevation_deg for name, antenna in run.antennas.items()}
    count: dict[str, int] = {}
    pairs = set(zip(windows["spacecraft"], windows["antenna"], strict=True))
    for craft, antenna in sorted(pairs):
        for chain in chains_between(run, craft, antenna):
            for notice in chain_notices(run, chain, sky_path(run, antenna, chain), lowest[antenna]):
                count[notice] = count.get(notice, 0) + 1
    return [f"{notice} ({links} link{'s' if links > 1 else ''})" for notice, links in count.items()]


def _frequency(run: Run, chain: Chain, path: SkyPath) -> list[str]:
    found = []
    if chain.frequency_mhz < 1_000.0:
        allowance = f"ionosphere: the stated allowance of {run.policy.ionospheric_allowance_db:g} dB"
        found.append(f"below 1 GHz gas and rain are those of 1 GHz; {allowance}")
    if path.percent is not None and not 4_000.0 <= chain.frequency_mhz <= 20_000.0:
        found.append("P.618 scintillation is stated for 4 to 20 GHz; its formula is carried on")
    return found


def _elevation(path: SkyPath, lowest_deg: float) -> list[str]:
    if lowest_deg >= LOWEST_STATED_ELEVATION_DEG:
        return []
    air = "P.676 gas, P.840 cloud and P.618 scintillation are" if path.percent is not None else "P.676 gas is"
    held = "; cloud and scintillation are held below 2.9 deg" if path.percent is not None else ""
    return [f"{air} stated from 5 deg; carried on below it{held}"]


def _weather(run: Run, path: SkyPath) -> list[str]:
    found = []
    percent, rate = path.percent, path.site.rain_rate_mm_per_h
    if rate is not None:
        found.append(f"{path.site.name}: {rate:g} mm/h of rain replaces the statistics of rain")
    elif percent is not None and percent > 5.0:
        found.append("P.618 rain is stated for 0.001 to 5 %; beyond it fades out towards the share of time with rain")
    if percent is not None and percent < 0.01:
        found.append("P.618 scintillation is stated for 0.01 to 50 %; that of 0.01 % is taken")
    return found


def _receiver(chain: Chain) -> list[str]:
    receiver, found = chain.receiver, []
    if receiver is None:
        return []
    if receiver.noise_temperature_k is None and receiver.receiver_noise_k is None:
        found.append(f"receiver {receiver.name}: G/T without noise_temperature_k; rain attenuates but adds no noise")
    if dish_of(receiver, chain.frequency_mhz)[0] is None:
        found.append(f"receiver {receiver.name}: no diameter known; the dish averages no scintillation away")
    return found

