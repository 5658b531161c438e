"""Do contacts disturb another one of the plan: C/I against each, and against all that send at once, computed anew."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from passplan.inputs.fleet import DownlinkRadio
from passplan.inputs.matching import matching_loss_db
from passplan.inputs.run import Run
from passplan.link.budget import beamwidth_deg, dish_gain_dbi, free_space_loss_db, off_nadir_deg
from passplan.planning.audit.faults import Fault
from passplan.planning.audit.quality import radiated_dbw
from passplan.planning.audit.receiving import diameter_m, nominal_db_per_k
from passplan.planning.audit.rows import Contact
from passplan.planning.audit.sky import Floats, Sight, sight

_TOLERANCE_DB = 0.1
_CROSS_POLAR_DB = 20.0
_HALF_POWER_DB = 3.0103
_LINEAR = ("H", "V")


def check_interference(run: Run, contacts: Sequence[Contact]) -> Iterator[Fault]:
    """A fault for each contact that hears others of the plan too well, one of them alone or all that send at once."""
    required_db = run.policy.required_c_over_i_db
    if required_db is None:
        return
    sending = [contact for contact in contacts if contact.service != "command"]
    for victim in sending:
        ear = _ear(run, victim)
        if ear is None:
            continue
        time_s = np.arange(victim.start_s, victim.end_s, 1.0)
        heard, alone = np.zeros_like(time_s), False
        for other in sending:
            together = (time_s >= other.start_s) & (time_s < other.end_s)
            if victim.spacecraft != other.spacecraft and np.any(together) and _in_band(run, ear.radio, other):
                one = _over_carrier(run, ear, other, time_s[together])
                heard[together] += one
                if (least_db := _decibel(one)) < required_db - _TOLERANCE_DB:
                    alone = True
                    sentence = f"{other.spacecraft} sends at the same time and leaves a C/I of {least_db:.1f} dB"
                    yield Fault("interference", victim.place, f"{sentence}, {required_db:g} dB are required")
        if not alone and (least_db := _decibel(heard)) < required_db - _TOLERANCE_DB:
            sentence = f"all that send at the same time leave a C/I of {least_db:.1f} dB"
            yield Fault("interference", victim.place, f"{sentence}, {required_db:g} dB are required")


@dataclass(frozen=True)
class _Ear:
    """The receiver of a contact: its beam, and what the wanted carrier loses on the way into it."""

    victim: Contact
    radio: DownlinkRadio
    peak_dbi: float
    width_deg: float
    mismatch_db: float


def _ear(run: Run, victim: Contact) -> _Ear | None:
    radio = run.radios[victim.radio]
    if not isinstance(radio, DownlinkRadio):
        return None
    fitting = [
        (nominal_db_per_k(r) - r.pointing_loss_db - loss_db, loss_db, r)
        for r in (run.receivers[name] for name in run.antennas[victim.antenna].receivers)
        if (loss_db := matching_loss_db(radio, r)) is not None
    ]
    if not fitting:
        return None
    _, mismatch_db, receiver = max(fitting, key=lambda entry: entry[0])
    across_m = diameter_m(receiver, radio.frequency_mhz)
    width_deg = receiver.beamwidth_deg
    if width_deg is None:
        if across_m is None:
            return None
        width_deg = beamwidth_deg(radio.frequency_mhz, across_m)
    peak_dbi = receiver.gain_dbi if receiver.gain_dbi is not None else 10.0 * float(np.log10(27_000.0 / width_deg**2))
    return _Ear(victim, radio, peak_dbi, width_deg, mismatch_db)


def _in_band(run: Run, radio: DownlinkRadio, other: Contact) -> bool:
    aboard = (run.radios[name] for name in run.spacecraft[other.spacecraft].radios)
    return any(isinstance(item, DownlinkRadio) and _share(radio, item) > 0.0 for item in aboard)


def _over_carrier(run: Run, ear: _Ear, other: Contact, time_s: Floats) -> Floats:
    """Power of the other spacecraft over that of the wanted one, as received."""
    victim, radio, width_deg = ear.victim, ear.radio, ear.width_deg
    site = run.sites[run.antennas[victim.antenna].site]
    wanted = sight(run.orbits[victim.spacecraft], site, run.start_utc, time_s)
    seen = sight(run.orbits[other.spacecraft], site, run.start_utc, time_s)
    apart_deg = _apart_deg(wanted, seen)
    aside_db = ear.peak_dbi - dish_gain_dbi(apart_deg, ear.peak_dbi, width_deg)
    lost_db = radio.pointing_loss_db + ear.mismatch_db
    carrier_dbw = _arriving_dbw(radio, wanted, site.latitude_deg, site.height_m) - lost_db
    power_w = np.zeros_like(time_s)
    for item in (run.radios[name] for name in run.spacecraft[other.spacecraft].radios):
        if isinstance(item, DownlinkRadio) and (share := _share(radio, item)) > 0.0:
            guard_db = np.where(apart_deg <= width_deg, _guard_db(radio.polarisation, item.polarisation), 0.0)
            level_dbw = _arriving_dbw(item, seen, site.latitude_deg, site.height_m) - aside_db - guard_db
            power_w += share * 10.0 ** (level_dbw / 10.0)
    return np.asarray(np.where(seen.elevation_deg > 0.0, power_w / 10.0 ** (carrier_dbw / 10.0), 0.0))


def _decibel(over_carrier: Floats) -> float:
    """Least C/I [dB]; infinite where nothing is heard."""
    most = float(np.max(over_carrier, initial=0.0))
    return -10.0 * float(np.log10(most)) if most > 0.0 else float("inf")


def _arriving_dbw(radio: DownlinkRadio, seen: Sight, latitude_deg: float, height_m: float) -> Floats:
    level_dbw = radiated_dbw(radio) - free_space_loss_db(radio.frequency_mhz, seen.range_km)
    if radio.pattern:
        points = np.array(radio.pattern)
        angle_deg = off_nadir_deg(seen.elevation_deg, seen.range_km, latitude_deg, height_m)
        level_dbw = level_dbw - np.interp(angle_deg, points[:, 0], points[:, 1])
    return np.asarray(level_dbw)


def _share(own: DownlinkRadio, other: DownlinkRadio) -> float:
    """How much of the other's band lies in one's own."""
    edges = [
        (r.frequency_mhz - width / 2.0, r.frequency_mhz + width / 2.0)
        for r in (own, other)
        for width in (r.symbol_rate_msps * (1.0 + r.roll_off),)
    ]
    common_mhz = min(edges[0][1], edges[1][1]) - max(edges[0][0], edges[1][0])
    return max(common_mhz, 0.0) / (edges[1][1] - edges[1][0])


def _guard_db(own: str, other: str) -> float:
    if own == other:
        return 0.0
    return _CROSS_POLAR_DB if (own in _LINEAR) == (other in _LINEAR) else _HALF_POWER_DB


def _apart_deg(first: Sight, second: Sight) -> Floats:
    """Angle between two directions, by the haversine."""
    low, high = np.radians(first.elevation_deg), np.radians(second.elevation_deg)
    turn = np.radians(first.azimuth_deg - second.azimuth_deg)
    square = np.sin((low - high) / 2.0) ** 2 + np.cos(low) * np.cos(high) * np.sin(turn / 2.0) ** 2
    return np.asarray(np.degrees(2.0 * np.arcsin(np.sqrt(np.clip(square, 0.0, 1.0)))))
