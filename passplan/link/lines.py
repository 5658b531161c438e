"""One link budget line by line, to be checked with a pocket calculator, and one along a pass."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.pointing import LookAngles, look_angles
from passplan.inputs.fleet import CommandRadio, DownlinkRadio
from passplan.inputs.ground import Receiver, Transmitter
from passplan.inputs.run import Run
from passplan.link.atmosphere import LOWEST_STATED_ELEVATION_DEG, ZenithGas, gas_attenuation_db, gas_tables
from passplan.link.budget import BOLTZMANN_DBW_PER_K_HZ, Floats, ebn0_from_esn0_db, free_space_loss_db
from passplan.link.chains import (
    Chain,
    Rung,
    best_receiver,
    best_transmitter,
    chains_between,
    receiver_figure_db_per_k,
)


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
        terms = [*_geometry(look), *_signal(run, antenna, chain, look), *_demodulation(run, chain, look, antenna)]
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


def _look(run: Run, spacecraft: str, antenna: str, times_utc: NDArray[np.datetime64]) -> LookAngles:
    return look_angles(run.orbits[spacecraft], run.sites[run.antennas[antenna].site], times_utc)


def _gas(run: Run, antenna: str, chain: Chain) -> ZenithGas:
    site = run.sites[run.antennas[antenna].site]
    return gas_tables([(site, chain.frequency_mhz)])[site.name, chain.frequency_mhz]


def _quality_db(run: Run, antenna: str, chain: Chain, look: LookAngles) -> Floats:
    loss_db = free_space_loss_db(chain.frequency_mhz, look.range_km)
    return np.asarray(chain.merit_db - loss_db - gas_attenuation_db(_gas(run, antenna, chain), look.elevation_deg))


def _pick(rungs: tuple[Rung, ...], quality_db: float, margin_db: float) -> tuple[Rung, bool]:
    """The fastest rung that holds the margin; where none does, the most robust one and False."""
    for rung in rungs:
        if quality_db - rung.required_db >= margin_db:
            return rung, True
    return rungs[-1], False


def _geometry(look: LookAngles) -> Iterator[_Term]:
    elevation = float(look.elevation_deg[0])
    note = "geometric, no refraction" if elevation >= 0.0 else "below the horizon: there is no link"
    yield "azimuth", float(look.azimuth_deg[0]), "deg", "from true north"
    yield "elevation", elevation, "deg", note
    yield "slant range", float(look.range_km[0]), "km", "orbit and site"


def _signal(run: Run, antenna: str, chain: Chain, look: LookAngles) -> Iterator[_Term]:
    """From EIRP to energy per symbol (or bit) over noise density."""
    radio, partner, mismatch_db = _ends(run, antenna, chain)
    aboard, ground = f"radio {radio.name}", f"{'receiver' if isinstance(partner, Receiver) else 'transmitter'} {partner.name}"
    low = float(look.elevation_deg[0]) < LOWEST_STATED_ELEVATION_DEG
    gas_source = "ITU-R P.676-12, Annex 2" + (", carried on below its stated 5 deg" if low else "")
    gas_db = float(gas_attenuation_db(_gas(run, antenna, chain), look.elevation_deg)[0])
    down = isinstance(radio, DownlinkRadio)
    rate_hz = radio.symbol_rate_msps * 1e6 if isinstance(radio, DownlinkRadio) else radio.bit_rate_kbps * 1e3
    rate_db = 10.0 * float(np.log10(rate_hz))
    quality_db = float(_quality_db(run, antenna, chain, look)[0]) + radio.implementation_loss_db
    yield "frequency", chain.frequency_mhz, "MHz", aboard
    yield "EIRP", _eirp_dbw(radio, partner), "dBW", aboard if down else ground
    yield "pointing loss aboard", -radio.pointing_loss_db, "dB", aboard
    yield "free-space loss", -float(free_space_loss_db(chain.frequency_mhz, look.range_km)[0]), "dB", "ITU-R P.525"
    yield "gas attenuation", -gas_db, "dB", gas_source
    yield "polarisation loss", -mismatch_db, "dB", f"{radio.polarisation} with {'/'.join(partner.polarisations)}"
    yield "pointing loss on the ground", -partner.pointing_loss_db, "dB", ground
    yield "G/T", _figure_db_per_k(radio, partner), "dB/K", ground if down else aboard
    yield "Boltzmann's constant", -BOLTZMANN_DBW_PER_K_HZ, "dBHzK/W", "SI"
    yield "C/N0", quality_db + rate_db, "dBHz", "sum of the terms above"
    yield "symbol rate" if down else "bit rate", -rate_db, "dBHz", aboard
    yield "Es/N0" if down else "Eb/N0", quality_db, "dB", "C/N0 less the rate"


def _demodulation(run: Run, chain: Chain, look: LookAngles, antenna: str) -> Iterator[_Term]:
    """From energy over noise density to margin and rate."""
    radio = run.radios[chain.radio]
    quality_db = float(_quality_db(run, antenna, chain, look)[0])
    rung, holds = _pick(chain.rungs, quality_db, run.policy.required_margin_db)
    note = "fastest that holds the margin" if holds else "most robust; it does not hold the margin"
    yield "implementation loss", -radio.implementation_loss_db, "dB", f"radio {radio.name}"
    if isinstance(radio, DownlinkRadio):
        efficiency = rung.rate_mbps / radio.symbol_rate_msps
        ebn0_db = float(ebn0_from_esn0_db(quality_db + radio.implementation_loss_db, efficiency))
        yield "modcod", rung.name, "", note
        yield "Eb/N0", ebn0_db, "dB", "Es/N0 - 10 log10(efficiency), before implementation loss"
        yield "required Es/N0", -rung.required_db, "dB", run.modcod_tables[radio.modcod_table].source
    else:
        yield "required Eb/N0", -rung.required_db, "dB", f"radio {radio.name}"
    yield "margin", quality_db - rung.required_db, "dB", "what is left"
    yield "margin required", run.policy.required_margin_db, "dB", "policy"
    yield "net rate", rung.rate_mbps if holds else 0.0, "Mbit/s", note


def _ends(run: Run, antenna: str, chain: Chain) -> tuple[DownlinkRadio | CommandRadio, Receiver | Transmitter, float]:
    """The radio, its partner on the ground and the polarisation loss between them."""
    radio, ground = run.radios[chain.radio], run.antennas[antenna]
    if isinstance(radio, DownlinkRadio):
        found: tuple[Receiver | Transmitter, float] | None = best_receiver(
            radio, [run.receivers[name] for name in ground.receivers]
        )
    else:
        found = best_transmitter(radio, [run.transmitters[name] for name in ground.transmitters])
    if found is None:
        raise KeyError(f"no chain of {antenna} serves radio {radio.name}")
    return radio, *found


def _eirp_dbw(radio: DownlinkRadio | CommandRadio, partner: Receiver | Transmitter) -> float:
    return partner.eirp_dbw if isinstance(partner, Transmitter) else _downlink(radio).eirp_dbw


def _figure_db_per_k(radio: DownlinkRadio | CommandRadio, partner: Receiver | Transmitter) -> float:
    if isinstance(radio, CommandRadio):
        return radio.g_over_t_db_per_k
    if isinstance(partner, Receiver):
        return receiver_figure_db_per_k(partner)
    raise TypeError("a downlink radio is served by a receiver")


def _along(run: Run, antenna: str, chain: Chain, look: LookAngles, times_utc: NDArray[np.datetime64]) -> pd.DataFrame:
    quality_db = _quality_db(run, antenna, chain, look)
    picks = [_pick(chain.rungs, float(value), run.policy.required_margin_db) for value in quality_db]
    columns = (
        times_utc, chain.direction, chain.radio, chain.partner, look.azimuth_deg, look.elevation_deg, look.range_km,
        quality_db,
        [rung.name if holds else "" for rung, holds in picks],
        [float(value) - rung.required_db for value, (rung, _) in zip(quality_db, picks, strict=True)],
        [rung.rate_mbps if holds else 0.0 for rung, holds in picks],
    )
    return pd.DataFrame(dict(zip(_ALONG_COLUMNS, columns, strict=True)))
