"""One link budget line by line, to be checked with a pocket calculator, and one along a pass."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.pointing import LookAngles, look_angles
from passplan.inputs.fleet import DownlinkRadio
from passplan.inputs.run import Run
from passplan.link.atmosphere import LOWEST_STATED_ELEVATION_DEG, gas_attenuation_db, gas_tables
from passplan.link.budget import BOLTZMANN_DBW_PER_K_HZ, Floats, ebn0_from_esn0_db, free_space_loss_db
from passplan.link.chains import Chain, Rung, chains_between


@dataclass(frozen=True)
class BudgetLine:
    """One term of a budget: which link it belongs to, what it is, its value, unit and source."""

    link: str
    term: str
    value: float | str
    unit: str
    source: str


def budget_lines(run: Run, spacecraft: str, antenna: str, at_utc: np.datetime64) -> list[BudgetLine]:
    """Every downlink and command link between a spacecraft and an antenna at an instant, term by term.

    The terms of a link add up as printed (losses are negative). Empty where no radio matches a chain of
    the antenna. :class:`KeyError` where the run has no such spacecraft, orbit or antenna.
    """
    look = _look(run, spacecraft, antenna, np.array([at_utc], "datetime64[ms]"))
    lines: list[BudgetLine] = []
    for chain in chains_between(run, spacecraft, antenna):
        link = f"{chain.direction} {chain.radio} via {chain.partner}"
        path = _path(run, antenna, chain, look)
        terms = (*_geometry(run, look), *_signal(chain, path), *_demodulation(run, chain, path))
        lines.extend(BudgetLine(link, *term) for term in terms)
    return lines


def link_along(run: Run, spacecraft: str, antenna: str, times_utc: NDArray[np.datetime64]) -> pd.DataFrame:
    """Quality, margin and rate of every link at each time, one row per link and time.

    Columns: ``utc, direction, radio, partner, azimuth_deg, elevation_deg, range_km, quality_db`` (Es/N0, for
    commands Eb/N0, after implementation loss), ``modcod`` (the fastest that holds the policy's margin, or
    empty), ``margin_db`` (of that modcod, else of the most robust one), ``rate_mbps``.
    """
    look = _look(run, spacecraft, antenna, times_utc)
    tables = [_along(run, antenna, chain, look, times_utc) for chain in chains_between(run, spacecraft, antenna)]
    return pd.concat(tables, ignore_index=True) if tables else pd.DataFrame(columns=list(_ALONG_COLUMNS))


_ALONG_COLUMNS = (
    "utc", "direction", "radio", "partner", "azimuth_deg", "elevation_deg", "range_km", "quality_db", "modcod",
    "margin_db", "rate_mbps",
)
_Term = tuple[str, float | str, str, str]


@dataclass(frozen=True)
class _Path:
    """The moving terms of one chain: pointing, losses [dB], and the quality that is left [dB]."""

    look: LookAngles
    free_space_db: Floats
    gas_db: Floats
    quality_db: Floats


def _look(run: Run, spacecraft: str, antenna: str, times_utc: NDArray[np.datetime64]) -> LookAngles:
    site = run.sites[run.antennas[antenna].site]
    return look_angles(run.orbits[spacecraft], site, times_utc, refraction=run.policy.refraction != "off")


def _path(run: Run, antenna: str, chain: Chain, look: LookAngles) -> _Path:
    site = run.sites[run.antennas[antenna].site]
    gas = gas_tables([(site, chain.frequency_mhz)])[site.name, chain.frequency_mhz]
    free_space_db = free_space_loss_db(chain.frequency_mhz, look.range_km)
    gas_db = gas_attenuation_db(gas, look.elevation_deg)
    return _Path(look, free_space_db, gas_db, np.asarray(chain.merit_db - free_space_db - gas_db))


def _pick(rungs: tuple[Rung, ...], quality_db: float, margin_db: float) -> tuple[Rung, bool]:
    """The fastest rung that holds the margin; where none does, the most robust one and False."""
    for rung in rungs:
        if quality_db - rung.required_db >= margin_db:
            return rung, True
    return rungs[-1], False


def _geometry(run: Run, look: LookAngles) -> Iterator[_Term]:
    elevation = float(look.elevation_deg[0])
    seen = "geometric, no refraction" if run.policy.refraction == "off" else "apparent, refraction by ITU-R P.834"
    note = seen if elevation >= 0.0 else "below the horizon: there is no link"
    yield "azimuth", float(look.azimuth_deg[0]), "deg", "from true north"
    yield "elevation", elevation, "deg", note
    yield "slant range", float(look.range_km[0]), "km", "orbit and site"


def _signal(chain: Chain, path: _Path) -> Iterator[_Term]:
    """From EIRP to energy per symbol (or bit) over noise density; 0.0 - x, so that no loss prints as -0."""
    aboard = f"radio {chain.radio}"
    ground = f"{'receiver' if chain.direction == 'downlink' else 'transmitter'} {chain.partner}"
    sender, listener = (aboard, ground) if chain.direction == "downlink" else (ground, aboard)
    low = float(path.look.elevation_deg[0]) < LOWEST_STATED_ELEVATION_DEG
    gas_source = "ITU-R P.676-12, Annex 2" + (", carried on below its stated 5 deg" if low else "")
    rate_db = 10.0 * float(np.log10(chain.rate_hz))
    ratio_db = float(path.quality_db[0]) + chain.implementation_loss_db
    yield "frequency", chain.frequency_mhz, "MHz", aboard
    yield "EIRP", chain.eirp_dbw, "dBW", sender
    yield "pointing loss aboard", 0.0 - chain.pointing_loss_aboard_db, "dB", aboard
    yield "free-space loss", -float(path.free_space_db[0]), "dB", "ITU-R P.525"
    yield "gas attenuation", -float(path.gas_db[0]), "dB", gas_source
    yield "polarisation loss", 0.0 - chain.polarisation_loss_db, "dB", f"{chain.polarisation} aboard, {ground}"
    yield "pointing loss on the ground", 0.0 - chain.pointing_loss_ground_db, "dB", ground
    yield "G/T", chain.g_over_t_db_per_k, "dB/K", listener
    yield "Boltzmann's constant", -BOLTZMANN_DBW_PER_K_HZ, "dBHzK/W", "SI, taken off"
    yield "C/N0", ratio_db + rate_db, "dBHz", "sum of EIRP and the terms below it"
    yield "symbol rate" if chain.direction == "downlink" else "bit rate", -rate_db, "dBHz", aboard
    yield "Es/N0" if chain.direction == "downlink" else "Eb/N0", ratio_db, "dB", "C/N0 less the rate"


def _demodulation(run: Run, chain: Chain, path: _Path) -> Iterator[_Term]:
    """From energy over noise density to margin and rate."""
    radio, quality_db = run.radios[chain.radio], float(path.quality_db[0])
    rung, holds = _pick(chain.rungs, quality_db, run.policy.required_margin_db)
    note = "fastest that holds the margin" if holds else "most robust; it does not hold the margin"
    yield "implementation loss", 0.0 - chain.implementation_loss_db, "dB", f"radio {chain.radio}"
    if isinstance(radio, DownlinkRadio):
        yield "modcod", rung.name, "", note
        yield "required Es/N0", -rung.required_db, "dB", run.modcod_tables[radio.modcod_table].source
    else:
        yield "required Eb/N0", -rung.required_db, "dB", f"radio {chain.radio}"
    asked = f"what is left; the policy asks for {run.policy.required_margin_db:g} dB"
    yield "margin", quality_db - rung.required_db, "dB", asked
    yield "net rate", rung.rate_mbps if holds else 0.0, "Mbit/s", note
    if isinstance(radio, DownlinkRadio):
        ratio_db = quality_db + chain.implementation_loss_db
        ebn0_db = float(ebn0_from_esn0_db(ratio_db, rung.rate_mbps / radio.symbol_rate_msps))
        yield "Eb/N0", ebn0_db, "dB", "Es/N0 - 10 log10(efficiency), for comparison"


def _along(run: Run, antenna: str, chain: Chain, look: LookAngles, times_utc: NDArray[np.datetime64]) -> pd.DataFrame:
    quality_db = _path(run, antenna, chain, look).quality_db
    picks = [_pick(chain.rungs, float(value), run.policy.required_margin_db) for value in quality_db]
    columns = (
        times_utc, chain.direction, chain.radio, chain.partner, look.azimuth_deg, look.elevation_deg, look.range_km,
        quality_db,
        [rung.name if holds else "" for rung, holds in picks],
        [float(value) - rung.required_db for value, (rung, _) in zip(quality_db, picks, strict=True)],
        [rung.rate_mbps if holds else 0.0 for rung, holds in picks],
    )
    return pd.DataFrame(dict(zip(_ALONG_COLUMNS, columns, strict=True)))
