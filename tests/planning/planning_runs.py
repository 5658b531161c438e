"""A small run with made-up windows and links, for tests from options to tables."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from passplan.inputs.calendar_records import Closure, Request
from passplan.inputs.fleet import DownlinkRadio, Spacecraft
from passplan.inputs.ground import Antenna, Receiver, Site
from passplan.inputs.modcods import builtin_table
from passplan.inputs.policy import Policy
from passplan.inputs.run import Run
from passplan.link.choice import CommandChoice, DownlinkChoice, WindowLink

START = np.datetime64("2027-03-09T00:00:00.000", "ms")


@dataclass(frozen=True)
class SteadyDownlink:
    """Sends at one rate from ``from_s`` to ``until_s``, after 20 s of acquisition."""

    from_s: int = 0
    until_s: int = 10**6
    rate_mbps: float = 80.0

    def best(self, start_s: int, end_s: int) -> DownlinkChoice | None:
        a, b = max(start_s, self.from_s) + 20, min(end_s, self.until_s)
        if b <= a:
            return None
        return DownlinkChoice("x", "rx", 8_200.0, "RHCP", "QPSK 3/4", self.rate_mbps, a, b, b - a,
                              self.rate_mbps * (b - a) / 8.0, 4.5)


@dataclass(frozen=True)
class SteadyCommand:
    """Commands all along, after 10 s of acquisition."""

    def best(self, start_s: int, end_s: int) -> CommandChoice | None:
        return CommandChoice("s", "tx", 2_050.0, "RHCP", start_s + 10, end_s, end_s - start_s - 10, 12.0)


BOTH = WindowLink(SteadyDownlink(), SteadyCommand())
DOWN = WindowLink(SteadyDownlink(), None)
UP = WindowLink(None, SteadyCommand())


def at(second: float) -> str:
    """An instant of the run, as a user writes it."""
    return f"{START + np.timedelta64(round(second * 1e3), 'ms')}Z"


def closure(antenna: str, start_s: float, end_s: float) -> Closure:
    """A closure by seconds from the start."""
    return Closure(antenna=antenna, start_utc=at(start_s), end_utc=at(end_s))


def request(name: str, craft: str, start_s: float, end_s: float, **rest: Any) -> Request:
    """A request by seconds from the start."""
    return Request(name=name, spacecraft=craft, earliest_utc=at(start_s), latest_utc=at(end_s), **rest)


def make_run(policy: dict[str, Any] | None = None, craft: dict[str, Any] | None = None, **rest: Any) -> Run:
    """Two spacecraft and two antennas at one site, over two hours."""
    fleet = {name: Spacecraft(name=name, catalogue_number=k + 1, **{
        "radios": ("x",), "weight": 2.0, "generation_mb_per_s": 0.5, "storage_mb": 9_000.0, "start_fill_mb": 4_000.0,
        **(craft or {})}) for k, name in enumerate(("Teasel-1", "Teasel-2"))}
    antennas = {name: Antenna(name=name, site="Isvarde", receivers=("rx",), prepare_s=60, release_s=30,
                              price_per_minute=price)
                for name, price in (("Isvarde-A", 0.0), ("Isvarde-B", 3.0))}
    values: dict[str, Any] = {
        "name": "small", "start_utc": START, "end_utc": START + np.timedelta64(7_200, "s"), "spacecraft": fleet,
        "radios": {"x": DownlinkRadio(name="x", direction="downlink", frequency_mhz=8_200, polarisation="RHCP",
                                      eirp_dbw=10, symbol_rate_msps=40, acquisition_s=20)},
        "sites": {"Isvarde": Site(name="Isvarde", latitude_deg=69, longitude_deg=17)}, "antennas": antennas,
        "receivers": {"rx": Receiver(name="rx", low_mhz=8_000, high_mhz=8_400, polarisations=("RHCP",),
                                     g_over_t_db_per_k=30)},
        "transmitters": {}, "modcod_tables": {"dvb-s2": builtin_table("dvb-s2")}, "closures": (), "requests": (),
        "policy": Policy(**{"gap": 0.0, "min_contact_s": 120, **(policy or {})}),
        "orbits": dict.fromkeys(fleet), "left_out": {}, "elements": pd.DataFrame(), **rest}
    return Run(**values)


def make_windows(rows: list[tuple[str, str, float, float]]) -> pd.DataFrame:
    """The windows table of (spacecraft, antenna, start_s, end_s)."""
    millisecond = np.timedelta64(1, "ms")
    return pd.DataFrame({
        "window_id": [f"{craft}.{antenna}.{k}" for k, (craft, antenna, _, _) in enumerate(rows)],
        "spacecraft": [row[0] for row in rows], "antenna": [row[1] for row in rows], "site": "Isvarde",
        "aos_utc": [START + round(row[2] * 1e3) * millisecond for row in rows],
        "los_utc": [START + round(row[3] * 1e3) * millisecond for row in rows],
        "peak_elevation_deg": [40.0 + k for k in range(len(rows))],
    }).astype({"aos_utc": "datetime64[ms]", "los_utc": "datetime64[ms]"})
