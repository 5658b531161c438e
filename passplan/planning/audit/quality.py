"""The quality of one contact's links, from the inputs and the audit's own pointing."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from passplan.inputs.fleet import CommandRadio, DownlinkRadio
from passplan.inputs.ground import Transmitter
from passplan.inputs.matching import matching_loss_db
from passplan.inputs.run import Run
from passplan.link.atmosphere import Sky, SkyPath, skies
from passplan.link.budget import (
    cn0_dbhz,
    density_ratio_db,
    eirp_from_power_dbw,
    free_space_loss_db,
    off_nadir_deg,
)
from passplan.planning.audit.mechanics import sends_freely
from passplan.planning.audit.receiving import diameter_m, figures_db_per_k, nominal_db_per_k
from passplan.planning.audit.rows import Contact
from passplan.planning.audit.sky import Floats, Sight, lifted_deg


@dataclass(frozen=True)
class Quality:
    """Es/N0 (commands: Eb/N0) after implementation loss [dB] at ``time_s``, joined by straight lines.

    ``ratio_db`` is the best that the audit cannot rule out, ``low_db`` the worst; they differ only near the
    Sun. ``free`` says of each whole second whether the ground may send, if that is limited.
    """

    time_s: Floats
    ratio_db: Floats
    low_db: Floats | None = None
    free: NDArray[np.bool_] | None = None

    def _series(self, low: bool) -> Floats:
        return self.low_db if low and self.low_db is not None else self.ratio_db

    def at_db(self, time_s: float) -> float:
        """The quality at one instant."""
        return float(np.interp(time_s, self.time_s, self.ratio_db))

    def least_db(self, start_s: float, end_s: float, *, low: bool = False) -> float:
        """The least quality from ``start_s`` to ``end_s``."""
        ratio_db = self._series(low)
        inner = ratio_db[(self.time_s > start_s) & (self.time_s < end_s)]
        ends = np.interp((start_s, end_s), self.time_s, ratio_db)
        return float(min(*ends, *inner))

    def longest_s(self, level_db: float, *, low: bool = False) -> float:
        """Whole seconds of the longest unbroken time at or above a level, where the ground may transmit."""
        ratio_db = self._series(low)
        holds = np.interp(_whole_seconds(self.time_s), self.time_s, ratio_db) >= level_db
        if self.free is not None:
            holds &= self.free
        edges = np.flatnonzero(np.diff(np.concatenate(([False], holds, [False])).astype(np.int8)))
        return float(max(edges[1::2] - edges[::2] - 1, default=0))


def _whole_seconds(time_s: Floats) -> Floats:
    return np.arange(np.ceil(time_s[0]), np.floor(time_s[-1]) + 1.0)


def downlink_quality(run: Run, contact: Contact, radio: DownlinkRadio, seen: Sight) -> Quality | None:
    """With the best of the antenna's receivers, or None where none of them can hear the radio."""
    fitting = []
    for receiver in (run.receivers[name] for name in run.antennas[contact.antenna].receivers):
        mismatch_db = matching_loss_db(radio, receiver)
        if mismatch_db is not None:
            loss_db = mismatch_db + receiver.pointing_loss_db
            fitting.append((nominal_db_per_k(receiver) - loss_db, receiver, loss_db))
    if not fitting:
        return None
    _, receiver, loss_db = max(fitting, key=lambda entry: entry[0])
    sky = _sky(run, contact, radio, diameter_m(receiver, radio.frequency_mhz), receiver.aperture_efficiency)
    radome_db = _radome_db(run, contact)
    worst, best = figures_db_per_k(run, contact, receiver, sky, seen, radio.frequency_mhz, radome_db)
    loss = loss_db + radio.pointing_loss_db + _path_loss_db(run, contact, radio, sky, seen)
    ratios = [
        density_ratio_db(cn0_dbhz(radiated_dbw(radio), loss, figure), radio.symbol_rate_msps * 1e6)
        - radio.implementation_loss_db
        for figure in (best, worst)
    ]
    return Quality(seen.time_s, np.asarray(ratios[0]), np.asarray(ratios[1]))


def command_quality(run: Run, contact: Contact, radio: CommandRadio, seen: Sight) -> Quality | None:
    """With the best of the antenna's transmitters, or None where none of them reaches the radio."""
    antenna = run.antennas[contact.antenna]
    levels = []
    for transmitter in (run.transmitters[name] for name in antenna.transmitters):
        mismatch_db = matching_loss_db(radio, transmitter)
        if mismatch_db is not None:
            levels.append(radiated_dbw(transmitter) - transmitter.pointing_loss_db - mismatch_db)
    if not levels:
        return None
    sky = _sky(run, contact, radio, None, 0.6)
    loss_db = radio.pointing_loss_db + _path_loss_db(run, contact, radio, sky, seen)
    cn0 = cn0_dbhz(max(levels), loss_db, radio.g_over_t_db_per_k)
    ratio_db = np.asarray(density_ratio_db(cn0, radio.bit_rate_kbps * 1e3) - radio.implementation_loss_db)
    return Quality(seen.time_s, ratio_db, None, sends_freely(run, contact, _whole_seconds(seen.time_s)))


def radiated_dbw(item: DownlinkRadio | Transmitter) -> float:
    """EIRP on boresight after back-off [dBW]."""
    if item.eirp_dbw is not None:
        return item.eirp_dbw - item.back_off_db
    power_w, gain_dbi = item.transmit_power_w or 0.0, item.antenna_gain_dbi or 0.0
    return float(eirp_from_power_dbw(power_w, gain_dbi, item.transmit_loss_db + item.back_off_db))


def _sky(
    run: Run, contact: Contact, radio: DownlinkRadio | CommandRadio, across_m: float | None, efficiency: float
) -> Sky:
    site = run.sites[run.antennas[contact.antenna].site]
    path = SkyPath(
        site, radio.frequency_mhz, radio.polarisation, run.policy.unavailability_percent, round(across_m or 0.0, 3),
        efficiency,
    )
    return skies([path])[path]


def _radome_db(run: Run, contact: Contact) -> float:
    antenna = run.antennas[contact.antenna]
    rained_on = run.policy.unavailability_percent is not None or run.sites[antenna.site].rain_rate_mm_per_h is not None
    return antenna.wet_radome_loss_db if rained_on else 0.0


def _path_loss_db(
    run: Run, contact: Contact, radio: DownlinkRadio | CommandRadio, sky: Sky, seen: Sight
) -> Floats:
    """Free space, air, wet radome, ionosphere, and a fixed antenna's pattern aboard [dB]."""
    site = run.sites[run.antennas[contact.antenna].site]
    height_deg = lifted_deg(run, contact.antenna, seen.elevation_deg)
    loss_db = free_space_loss_db(radio.frequency_mhz, seen.range_km) + sky.at(height_deg).total_db
    loss_db = loss_db + _radome_db(run, contact)
    if radio.frequency_mhz < 1_000.0:
        loss_db = loss_db + run.policy.ionospheric_allowance_db
    if radio.pattern:
        angle_deg = off_nadir_deg(seen.elevation_deg, seen.range_km, site.latitude_deg, site.height_m)
        points = np.array(radio.pattern)
        loss_db = loss_db + np.interp(angle_deg, points[:, 0], points[:, 1])
    return np.asarray(loss_db)
