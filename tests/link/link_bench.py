"""A small invented network and passes over it, for the link tests."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd

from passplan.geometry.pointing import Samples
from passplan.inputs.fleet import CommandRadio, DownlinkRadio, Spacecraft
from passplan.inputs.ground import Antenna, Receiver, Site, Transmitter
from passplan.inputs.modcods import builtin_table
from passplan.inputs.policy import Policy
from passplan.inputs.run import Run

EARTH_KM = 6_371.0
X_RADIO = DownlinkRadio(
    name="x", direction="downlink", frequency_mhz=8_200.0, polarisation="RHCP", eirp_dbw=15.0, symbol_rate_msps=50.0,
    pointing_loss_db=0.5, implementation_loss_db=1.5, acquisition_s=20.0,
)
COMMAND_RADIO = CommandRadio(
    name="up", direction="command", frequency_mhz=2_050.0, polarisation="RHCP", g_over_t_db_per_k=-28.0,
    bit_rate_kbps=64.0, acquisition_s=10.0,
)
RECEIVER = Receiver(name="rx", low_mhz=8_025.0, high_mhz=8_400.0, polarisations=("RHCP",), g_over_t_db_per_k=32.0)
TRANSMITTER = Transmitter(name="tx", low_mhz=2_025.0, high_mhz=2_110.0, polarisations=("RHCP",), eirp_dbw=48.0)


def network(
    radios: tuple[DownlinkRadio | CommandRadio, ...] = (X_RADIO, COMMAND_RADIO),
    receivers: tuple[Receiver, ...] = (RECEIVER,),
    transmitters: tuple[Transmitter, ...] = (TRANSMITTER,),
    **policy: Any,
) -> Run:
    """One spacecraft "Plover" with ``radios``, one antenna "Dish" with the chains, at a site at sea level."""
    craft = Spacecraft(name="Plover", catalogue_number=1, radios=tuple(radio.name for radio in radios))
    antenna = Antenna(
        name="Dish", site="Strand", receivers=tuple(r.name for r in receivers),
        transmitters=tuple(t.name for t in transmitters),
    )
    return Run(
        name="bench", start_utc=np.datetime64("2027-03-09T00:00:00", "ms"),
        end_utc=np.datetime64("2027-03-10T00:00:00", "ms"), spacecraft={"Plover": craft},
        radios={radio.name: radio for radio in radios},
        sites={"Strand": Site(name="Strand", latitude_deg=52.0, longitude_deg=4.0)}, antennas={"Dish": antenna},
        receivers={r.name: r for r in receivers}, transmitters={t.name: t for t in transmitters},
        modcod_tables={"dvb-s2": builtin_table("dvb-s2")}, closures=(), requests=(), policy=Policy(**policy),
        orbits={}, left_out={}, elements=pd.DataFrame(),
    )


def with_radio(run: Run, **changes: Any) -> Run:
    """The same run with fields of the downlink radio changed."""
    return replace(run, radios={**run.radios, "x": run.radios["x"].model_copy(update=changes)})


def passes(*shapes: tuple[float, float, float, float], step_s: float = 10.0) -> tuple[pd.DataFrame, Samples]:
    """Windows and samples of passes, each (AOS s, duration s, height km, least central angle deg) over "Dish"."""
    times, elevations, ranges, offsets = [], [], [], [0]
    for aos_s, duration_s, height_km, aside_deg in shapes:
        time = np.unique(np.append(np.arange(0.0, duration_s, step_s), duration_s))
        rate = np.sqrt(398_600.4418 / (EARTH_KM + height_km) ** 3)
        angle = np.hypot((time - duration_s / 2.0) * rate, np.radians(aside_deg))
        far = EARTH_KM + height_km
        distance = np.sqrt(EARTH_KM**2 + far**2 - 2.0 * EARTH_KM * far * np.cos(angle))
        times.append(aos_s + time)
        ranges.append(distance)
        elevations.append(np.degrees(np.arcsin((far**2 - EARTH_KM**2 - distance**2) / (2.0 * EARTH_KM * distance))))
        offsets.append(offsets[-1] + time.size)
    total = offsets[-1]
    samples = Samples(
        np.concatenate(times), np.zeros(total), np.concatenate(elevations), np.concatenate(ranges), np.zeros(total),
        np.array(offsets, np.int64),
    )
    return pd.DataFrame({"spacecraft": ["Plover"] * len(shapes), "antenna": ["Dish"] * len(shapes)}), samples
