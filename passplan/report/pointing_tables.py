"""Pointing tables for antenna controllers: one CSV for each contact, with a header that says what it holds."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.motion import LIGHT_KM_S
from passplan.geometry.pointing import LookAngles, look_angles
from passplan.inputs.run import Run
from passplan.link.chains import chains_between
from passplan.planning.record import PlanRecord
from passplan.report.cautions import CAUTIONS
from passplan.report.csv_files import harmless
from passplan.report.names import file_stems

_DECIMALS = {"azimuth_deg": 4, "elevation_deg": 4, "range_km": 4, "range_rate_km_s": 7}
_DECIMALS_HZ = 1
REFRACTED = "included: elevations are apparent, as radio waves are bent (ITU-R P.834, mean atmosphere)"


@dataclass(frozen=True)
class Issue:
    """How tables are issued: the step in seconds, and the instant after which they must not be used."""

    step_s: float
    expires_utc: str


def write_pointing_tables(record: PlanRecord, run: Run, folder: Path, issue: Issue) -> list[Path]:
    """Write one table for each contact into ``folder``; raises OSError where one cannot be written."""
    stems = file_stems(record.contacts["contact_id"])
    written = []
    for row in record.contacts.to_dict("records"):
        path = folder / f"{stems[row['contact_id']]}.csv"
        with path.open("w", encoding="utf-8", newline="") as file:
            file.writelines(f"# {harmless(key)}: {value}\n" for key, value in _header(row, record, run, issue))
            file.writelines(_lines(pointing_table(row, run, issue.step_s)))
        written.append(path)
    return written


def pointing_table(row: Mapping[Any, Any], run: Run, step_s: float = 1.0) -> pd.DataFrame:
    """The table of one contact: every ``step_s`` from its start, and at its end.

    Columns ``utc, azimuth_deg, elevation_deg, range_km, range_rate_km_s``, then for each carrier that the
    antenna serves ``doppler_RADIO_hz``, the shift that the far end receives, and ``station_RADIO_hz``, what the
    station tunes to: ``f (1 - v/c)`` to hear a downlink, ``f (1 + v/c)`` so that a command arrives at f.
    First order in v/c (common practice, no source); the next term stays below 3 Hz at 8 GHz in low orbit. The
    elevation is the apparent one (ITU-R P.834) where the policy counts refraction, else geometric.
    """
    start, end = (np.datetime64(row[key], "ms") for key in ("start_utc", "end_utc"))
    times = np.append(np.arange(start, end, np.timedelta64(round(step_s * 1000), "ms")), end)
    look = look_angles(
        run.orbits[row["spacecraft"]], run.sites[run.antennas[row["antenna"]].site], times, refraction=_refracted(run))
    columns: dict[str, Any] = {"utc": times, **{name: getattr(look, name) for name in _DECIMALS}}
    for name, (shift_hz, station_hz) in _carriers(row, run, look).items():
        columns |= {f"doppler_{name}_hz": shift_hz, f"station_{name}_hz": station_hz}
    return pd.DataFrame(columns)


def _refracted(run: Run) -> bool:
    return run.policy.refraction != "off"


def read_pointing_table(path: Path) -> tuple[dict[str, str], pd.DataFrame]:
    """A table as written: its header by key (cautions joined by lines), and its rows with ``utc`` as datetime64."""
    header: dict[str, str] = {}
    with path.open(encoding="utf-8") as file:
        for line in file:
            if not line.startswith("# "):
                break
            key, _, value = line[2:].rstrip("\n").partition(": ")
            header[key] = f"{header[key]}\n{value}" if key in header else value
    table = pd.read_csv(path, skiprows=sum(value.count("\n") + 1 for value in header.values()))
    table["utc"] = pd.to_datetime(table["utc"].str.rstrip("Z"), format="ISO8601").astype("datetime64[ms]")
    return header, table


def _carriers(row: Mapping[Any, Any], run: Run, look: LookAngles) -> dict[str, tuple[NDArray[Any], NDArray[Any]]]:
    found = {}
    beta = look.range_rate_km_s / LIGHT_KM_S
    for chain in chains_between(run, row["spacecraft"], row["antenna"]):
        hertz = chain.frequency_mhz * 1e6
        shift_hz = -beta * hertz
        found[chain.radio.replace(" ", "_")] = (
            shift_hz,
            hertz + shift_hz if chain.direction == "downlink" else hertz - shift_hz,
        )
    return found


def _header(row: Mapping[Any, Any], record: PlanRecord, run: Run, issue: Issue) -> list[tuple[str, str]]:
    summary, antenna = record.summary, run.antennas[row["antenna"]]
    site, craft = run.sites[antenna.site], summary["spacecraft"][row["spacecraft"]]
    draft = summary.get("approval", "draft") == "draft"
    valid = [f"{np.datetime64(row[key], 'ms')}Z" for key in ("start_utc", "end_utc")]
    return [
        ("file", "passplan pointing table"),
        ("contact", row["contact_id"]),
        ("plan_id", summary["plan_id"]),
        ("approval", "DRAFT until a named approval" if draft else str(summary["approval"])),
        ("spacecraft", row["spacecraft"]),
        ("catalogue_number", str(craft["catalogue_number"] or "none")),
        ("antenna", row["antenna"]),
        (
            "site",
            f"{site.name}, latitude {site.latitude_deg:g} deg, longitude {site.longitude_deg:g} deg east, "
            f"height {site.height_m:g} m above the WGS 84 ellipsoid",
        ),
        ("valid_from_utc", valid[0]),
        ("valid_to_utc", valid[1]),
        ("expires_utc", issue.expires_utc),
        ("orbit_from", craft["orbit_from"]),
        ("element_epoch_utc", craft["element_epoch_utc"] or "ephemeris"),
        ("step_s", f"{issue.step_s:g}"),
        ("refraction", REFRACTED if _refracted(run) else "not included: elevations are geometric"),
        ("light_time", "not included"),
        ("angles", "azimuth from true north through east, elevation above the plane of the ellipsoid"),
        ("doppler", "first order; range rate is positive when receding; station_ columns are what to tune to"),
        *(("caution", caution) for caution in CAUTIONS),
    ]


def _lines(table: pd.DataFrame) -> Iterator[str]:
    """The table as CSV lines. One format for whole rows: a day of seconds is many of them."""
    yield ",".join(table.columns) + "\n"
    utc = np.datetime_as_string(table["utc"].to_numpy("datetime64[ms]"), unit="ms").tolist()
    form = ",".join(["%sZ", *(f"%.{_DECIMALS.get(name, _DECIMALS_HZ)}f" for name in table.columns[1:])]) + "\n"
    yield from (form % row for row in zip(utc, *(table[name].tolist() for name in table.columns[1:]), strict=True))
