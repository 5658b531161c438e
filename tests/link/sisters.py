"""Several spacecraft on one frequency, near each other in the sky of one site."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd
from link_bench import X_RADIO, network

from passplan.geometry.windows import find_windows
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.elements.tle import parse_tle
from passplan.inputs.errors import Findings
from passplan.inputs.fleet import DownlinkRadio, Spacecraft
from passplan.inputs.ground import Receiver
from passplan.inputs.run import Run

_FIRST = "1 Z0105U 26214B   27067.69000000  .00000000  00000-0  21000-4 0  9990"
_SECOND = "2 Z0105 {:8.4f} {:8.4f} 0011000  90.0000 {:8.4f} 15.05491974 40050"


def orbit(mean_anomaly_deg: float, node_deg: float = 82.1, inclination_deg: float = 97.6) -> ElementSet:
    """A low orbit that stands at ``mean_anomaly_deg`` early on 8 March 2027."""
    lines = (_FIRST, _SECOND.format(inclination_deg, node_deg, mean_anomaly_deg))
    findings = Findings()
    found = parse_tle("\n".join(f"{line[:68]}{_checksum(line)}" for line in lines), "sisters.tle", findings)
    assert not findings.problems
    return found[0]


def sisters(orbits: dict[str, ElementSet], hours: int = 12, **policy: Any) -> Run:
    """Spacecraft on one X-band frequency, of alternating polarisation and power, over one dish of 50 dBi."""
    dish = Receiver(name="rx", low_mhz=8_025.0, high_mhz=8_400.0, polarisations=("RHCP", "LHCP"), gain_dbi=50.1,
                    noise_temperature_k=120.0)
    run = network((X_RADIO,), (dish,), (), **policy)
    radios: dict[str, DownlinkRadio] = {
        name: X_RADIO.model_copy(update={"name": f"x-{name}", "eirp_dbw": 12.0 + k % 3,
                                         "polarisation": ("RHCP", "RHCP", "LHCP")[k % 3]})
        for k, name in enumerate(orbits)
    }
    return replace(
        run, orbits=orbits, radios={radio.name: radio for radio in radios.values()},
        spacecraft={name: Spacecraft(name=name, catalogue_number=k + 1, radios=(radios[name].name,), storage_mb=1e6,
                                     start_fill_mb=5e5)
                    for k, name in enumerate(orbits)},
        end_utc=run.start_utc + np.timedelta64(hours, "h"),
    )


def windows_of(run: Run) -> pd.DataFrame:
    """The windows of a run, without mounts and losses."""
    refraction = run.policy.refraction != "off"
    return find_windows(run.orbits, run.antennas, run.sites, run.start_utc, run.end_utc, refraction=refraction)


def _checksum(line: str) -> int:
    return sum(int(c) if c.isdigit() else c == "-" for c in line[:68]) % 10
