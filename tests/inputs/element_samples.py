"""Invented element sets in every format, for the tests of the readers."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
from sgp4.alpha5 import to_alpha5
from sgp4.exporter import export_tle

from passplan.inputs.elements.mean import MeanElements, element_set, satrec_of
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.elements.tle_layout import checksum
from passplan.inputs.errors import Findings
from passplan.inputs.reader import Reader

START = np.datetime64("2027-03-09T00:00:00", "ms")
END = START + np.timedelta64(1, "D")

# 2027-03-08, 0.43 of a day: the fraction is whole in the eight decimals of a TLE and in microseconds.
MERLE = MeanElements(
    name="MERLE 1",
    catalogue_number=71_001,
    international_designator="2026-114A",
    epoch_days=9_928,
    epoch_s=0.43219876 * 86_400.0,
    mean_motion_rev_per_day=15.21043218,
    eccentricity=0.0011234,
    inclination_deg=97.4321,
    raan_deg=123.4567,
    argument_of_perigee_deg=87.6543,
    mean_anomaly_deg=272.3456,
    bstar_per_earth_radius=0.23456e-3,
    mean_motion_dot_rev_per_day2=0.00012345,
    element_set_number=42,
    revolution=1_234,
)


def made(days_before_start: float = 0.5, **changes: Any) -> ElementSet:
    """The sample set with its epoch so many days before the start of the horizon."""
    days = 9_929.0 - days_before_start
    whole = math.floor(days)
    mean = replace(MERLE, epoch_days=whole, epoch_s=(days - whole) * 86_400.0, **changes)
    return element_set(mean, Path("made"), "")


def tle_lines(mean: MeanElements = MERLE) -> tuple[str, str]:
    """The two lines of ``mean``, with the letter-coded number written by the library's own coder.

    The library's exporter itself takes the letters I and O, which the layout leaves out, for 18.... and 23....
    """
    satrec = satrec_of(mean)
    number = to_alpha5(satrec.satnum)
    one, two = (line[:2] + number + line[7:68] for line in export_tle(satrec))
    return one + str(checksum(one)), two + str(checksum(two))


def tle_text(*means: MeanElements) -> str:
    """Three-line sets."""
    return "".join("\n".join((mean.name, *tle_lines(mean))) + "\n" for mean in means or (MERLE,))


def omm(mean: MeanElements = MERLE, **changes: Any) -> dict[str, Any]:
    """The keywords of ``mean`` as plain JSON-like values; a change to None removes the keyword."""
    epoch = np.datetime64("2000-01-01", "us") + np.timedelta64(
        mean.epoch_days * 86_400_000_000 + round(mean.epoch_s * 1e6), "us"
    )
    record: dict[str, Any] = {
        "OBJECT_NAME": mean.name,
        "OBJECT_ID": mean.international_designator,
        "EPOCH": str(epoch),
        "MEAN_MOTION": mean.mean_motion_rev_per_day,
        "ECCENTRICITY": mean.eccentricity,
        "INCLINATION": mean.inclination_deg,
        "RA_OF_ASC_NODE": mean.raan_deg,
        "ARG_OF_PERICENTER": mean.argument_of_perigee_deg,
        "MEAN_ANOMALY": mean.mean_anomaly_deg,
        "NORAD_CAT_ID": mean.catalogue_number,
        "BSTAR": mean.bstar_per_earth_radius,
        "MEAN_MOTION_DOT": mean.mean_motion_dot_rev_per_day2,
        "MEAN_MOTION_DDOT": mean.mean_motion_ddot_rev_per_day3,
        "ELEMENT_SET_NO": mean.element_set_number,
        "REV_AT_EPOCH": mean.revolution,
    }
    record.update(changes)
    return {key: value for key, value in record.items() if value is not None}


STATED = {"CENTER_NAME": "EARTH", "REF_FRAME": "TEME", "TIME_SYSTEM": "UTC", "MEAN_ELEMENT_THEORY": "SGP4"}


def omm_kvn(*records: dict[str, Any]) -> str:
    """The records as KVN messages."""
    return "".join(
        "\n".join(["CCSDS_OMM_VERS = 3.0", "COMMENT invented", *(f"{k} = {v}" for k, v in {**STATED, **r}.items()), ""])
        for r in records
    )


def omm_xml(*records: dict[str, Any], space: str = "") -> str:
    """The records as an NDM with several OMM."""
    orbit = (
        "EPOCH",
        "MEAN_MOTION",
        "ECCENTRICITY",
        "INCLINATION",
        "RA_OF_ASC_NODE",
        "ARG_OF_PERICENTER",
        "MEAN_ANOMALY",
    )

    def block(name: str, content: dict[str, Any]) -> str:
        return f"<{name}>" + "".join(f"<{k}>{v}</{k}>" for k, v in content.items()) + f"</{name}>"

    def message(record: dict[str, Any]) -> str:
        meta = {k: v for k, v in record.items() if k.startswith("OBJECT")} | STATED
        mean = {k: v for k, v in record.items() if k in orbit}
        rest = {k: v for k, v in record.items() if k not in mean and k not in meta}
        data = f"<data>{block('meanElements', mean)}{block('tleParameters', rest)}</data>"
        return f"<omm version='3.0'><body><segment>{block('metadata', meta)}{data}</segment></body></omm>"

    return f"<?xml version='1.0'?><ndm{space}>" + "".join(map(message, records)) + "</ndm>"


def omm_csv(*records: dict[str, Any]) -> str:
    """The records as a table with the columns of the first."""
    columns = list(records[0])
    return "\n".join([",".join(columns), *(",".join(str(r.get(c, "")) for c in columns) for r in records), ""])


def apart_m(one: ElementSet, other: ElementSet, days: tuple[float, ...] = (-1.0, 0.0, 0.37, 3.0)) -> float:
    """The greatest distance between two sets in metres over some days around the first one's epoch."""
    worst = 0.0
    for day in days:
        at = (one.satrec.jdsatepoch, one.satrec.jdsatepochF + day)
        (_, a, _), (_, b, _) = one.satrec.sgp4(*at), other.satrec.sgp4(*at)
        worst = max(worst, math.dist(a, b) * 1e3)
    return worst


def reading(folder: Path) -> tuple[Reader, Findings]:
    """A reader over ``folder`` and empty findings."""
    return Reader(folder), Findings()


def lines_of(findings: Findings) -> list[str]:
    """The problems as the user sees them."""
    return [str(problem) for problem in findings.problems]
