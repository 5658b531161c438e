"""The quality of one contact's links, from the inputs and the audit's own pointing."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from passplan.inputs.fleet import CommandRadio, DownlinkRadio
from passplan.inputs.ground import Receiver, Transmitter
from passplan.inputs.matching import matching_loss_db
from passplan.inputs.run import Run
from passplan.link.atmosphere import gas_attenuation_db, gas_tables
from passplan.link.budget import cn0_dbhz, density_ratio_db, figure_of_merit_db_per_k, free_space_loss_db
from passplan.planning.audit.rows import Contact
from passplan.planning.audit.sky import Floats, Sight, lifted_deg


@dataclass(frozen=True)
class Quality:
    """Es/N0 (commands: Eb/N0) after implementation loss [dB] at ``time_s``, joined by straight lines."""

    time_s: Floats
    ratio_db: Floats

    def least_db(self, start_s: float, end_s: float) -> float:
        """The least quality from ``start_s`` to ``end_s``."""
        inner = self.ratio_db[(self.time_s > start_s) & (self.time_s < end_s)]
        ends = np.interp((start_s, end_s), self.time_s, self.ratio_db)
        return float(min(*ends, *inner))

    def longest_s(self, level_db: float) -> float:
        """Whole seconds of the longest unbroken time at or above a level."""
        seconds = np.arange(np.ceil(self.time_s[0]), np.floor(self.time_s[-1]) + 1.0)
        holds = np.interp(seconds, self.time_s, self.ratio_db) >= level_db
        edges = np.flatnonzero(np.diff(np.concatenate(([False], holds, [False])).astype(np.int8)))
        return float(max(edges[1::2] - edges[::2] - 1, default=0))


def downlink_quality(run: Run, contact: Contact, radio: DownlinkRadio, seen: Sight) -> Quality | None:
    """The best over the antenna's receivers, or None where none of them can hear the radio."""
    best: float | None = None
    for receiver in (run.receivers[name] for name in run.antennas[contact.antenna].receivers):
        mismatch_db = matching_loss_db(radio, receiver)
        if mismatch_db is not None:
            loss_db = mismatch_db + receiver.pointing_loss_db
            level = float(cn0_dbhz(radio.eirp_dbw - radio.pointing_loss_db, loss_db, _figure(receiver)))
            best = level if best is None else max(best, level)
    return None if best is None else _along(run, contact, radio, best, radio.symbol_rate_msps * 1e6, seen)


def command_quality(run: Run, contact: Contact, radio: CommandRadio, seen: Sight) -> Quality | None:
    """The best over the antenna's transmitters, or None where none of them reaches the radio."""
    best: float | None = None
    for transmitter in (run.transmitters[name] for name in run.antennas[contact.antenna].transmitters):
        mismatch_db = matching_loss_db(radio, transmitter)
        if mismatch_db is not None:
            level = _command_level(radio, transmitter, mismatch_db)
            best = level if best is None else max(best, level)
    return None if best is None else _along(run, contact, radio, best, radio.bit_rate_kbps * 1e3, seen)


def _command_level(radio: CommandRadio, transmitter: Transmitter, mismatch_db: float) -> float:
    loss_db = mismatch_db + transmitter.pointing_loss_db + radio.pointing_loss_db
    return float(cn0_dbhz(transmitter.eirp_dbw, loss_db, radio.g_over_t_db_per_k))


def _figure(receiver: Receiver) -> float:
    if receiver.g_over_t_db_per_k is not None:
        return receiver.g_over_t_db_per_k
    return float(figure_of_merit_db_per_k(receiver.gain_dbi or 0.0, receiver.noise_temperature_k or np.inf))


def _along(
    run: Run, contact: Contact, radio: DownlinkRadio | CommandRadio, level_dbhz: float, rate_hz: float, seen: Sight
) -> Quality:
    site = run.sites[run.antennas[contact.antenna].site]
    gas = gas_tables([(site, radio.frequency_mhz)])[site.name, radio.frequency_mhz]
    height_deg = lifted_deg(run, contact.antenna, seen.elevation_deg)
    path_db = free_space_loss_db(radio.frequency_mhz, seen.range_km) + gas_attenuation_db(gas, height_deg)
    ratio_db = density_ratio_db(level_dbhz - path_db, rate_hz) - radio.implementation_loss_db
    return Quality(seen.time_s, np.asarray(ratio_db))
