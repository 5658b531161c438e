"""Two spacecraft of the fleet in one beam: carrier over interference, and the times in which it is too low.

A spacecraft disturbs only while it sends, and it sends only in a contact of its own. So what is found here is
pairs: this spacecraft on this antenna, that one anywhere, and when both at once would not do. Each pair is
judged by itself; several interferers at once are added up by :func:`aggregate_db`, for the budget.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.pointing import LookAngles, Samples, look_angles
from passplan.geometry.sun import pointing_vectors
from passplan.inputs.fleet import DownlinkRadio
from passplan.inputs.ground import Receiver, Site
from passplan.inputs.run import Run
from passplan.link.budget import Floats, dish_gain_dbi, free_space_loss_db, off_nadir_deg
from passplan.link.chains import Chain, chains_between, radiated_dbw
from passplan.link.noise import dish_of
from passplan.link.profiles import pattern_loss_db
from passplan.link.stretches import find_stretches
from passplan.link.sun_noise import closest_deg

CROSS_POLAR_DB = 20.0
"""Discrimination of the orthogonal polarisation within the half-power beam, none outside it (common practice)."""

_LINEAR_CIRCULAR_DB = 3.0103


@dataclass(frozen=True)
class InterferencePair:
    """While ``victim`` is heard on ``antenna`` from ``start_s`` to ``end_s`` (whole seconds, rounded outward),
    ``interferer`` must not send; ``worst_db`` is the least C/I of that time."""

    victim: str
    antenna: str
    interferer: str
    start_s: int
    end_s: int
    worst_db: float


def interference_pairs(run: Run, windows: pd.DataFrame, samples: Samples) -> list[InterferencePair]:
    """Every pair whose C/I falls below the policy's ``required_c_over_i_db``; none where that is not set.

    A receiver whose gain and beamwidth are not known is not judged.
    """
    required_db = run.policy.required_c_over_i_db
    if required_db is None:
        return []
    pairs: list[InterferencePair] = []
    rows_of: dict[tuple[str, str], list[int]] = {}
    for row, pair in enumerate(zip(windows["spacecraft"], windows["antenna"], strict=True)):
        rows_of.setdefault((str(pair[0]), str(pair[1])), []).append(row)
    for (victim, antenna), rows in sorted(rows_of.items()):
        for chain in _downlinks(run, victim, antenna):
            for interferer in run.orbits:
                if interferer != victim and _overlapping(run, chain, interferer):
                    pairs += _of_pair(run, (victim, antenna, interferer), chain, samples, rows, required_db)
    return sorted(set(pairs), key=lambda p: (p.start_s, p.victim, p.antenna, p.interferer, p.end_s))


def c_over_i_db(
    run: Run, chain: Chain, interferer: str, site: Site, looks: tuple[LookAngles, LookAngles], apart_deg: Floats
) -> Floats:
    """C/I [dB] of a downlink chain against one spacecraft, shape (n,); infinite where it stands below the horizon.

    ``looks`` are the pointings to the wanted spacecraft and to the interferer at the same times, ``apart_deg``
    the angle between them. The air takes as much from both. A steered interferer is assumed to point here.
    """
    wanted, other = looks
    ratio_db = np.full(apart_deg.size, np.inf)
    receiver = chain.receiver
    if receiver is None or (shape := beam_of(receiver, chain.frequency_mhz)) is None:
        return ratio_db
    peak_dbi, width_deg = shape
    carrier_dbw = chain.eirp_dbw - chain.pointing_loss_aboard_db - chain.polarisation_loss_db
    carrier = carrier_dbw - free_space_loss_db(chain.frequency_mhz, wanted.range_km)
    carrier = np.asarray(carrier - _aboard(chain.pattern, wanted, site))
    # What the interferer's radios put into the band, in W.
    power_w = np.zeros(apart_deg.size)
    for radio in _radios(run, interferer):
        share = spectrum_share(run, chain, radio)
        if share > 0.0:
            off_db = peak_dbi - dish_gain_dbi(apart_deg, peak_dbi, width_deg)
            guard_db = np.where(apart_deg <= width_deg, _discrimination_db(chain.polarisation, radio.polarisation), 0.0)
            level_dbw = radiated_dbw(radio) + 10.0 * math.log10(share) - _aboard(radio.pattern, other, site)
            level_dbw = level_dbw - free_space_loss_db(radio.frequency_mhz, other.range_km) - off_db - guard_db
            power_w += 10.0 ** (level_dbw / 10.0)
    up = (other.elevation_deg > 0.0) & (power_w > 0.0)
    ratio_db[up] = carrier[up] - 10.0 * np.log10(power_w[up])
    return ratio_db


def aggregate_db(ratios_db: Iterable[Floats]) -> Floats:
    """C/I [dB] against several interferers at once: their powers add up."""
    total = sum(10.0 ** (-np.asarray(ratio) / 10.0) for ratio in ratios_db)
    with np.errstate(divide="ignore"):
        return np.asarray(-10.0 * np.log10(total))


def beam_of(receiver: Receiver, frequency_mhz: float) -> tuple[float, float] | None:
    """Peak gain [dBi] and half-power beamwidth [deg]; None where they are not known.

    Without a stated gain it is that of the beam, 10 log10(27 000 / width^2) (common practice, no source).
    """
    width_deg = dish_of(receiver, frequency_mhz)[1]
    if width_deg is None:
        return None
    gain_dbi = receiver.gain_dbi
    return (10.0 * math.log10(27_000.0 / width_deg**2) if gain_dbi is None else gain_dbi), width_deg


def spectrum_share(run: Run, chain: Chain, radio: DownlinkRadio) -> float:
    """The share of a radio's power that falls into the band of a chain; both bands are taken as level.

    A band is the symbol rate times one plus the roll-off, around the carrier.
    """
    own = run.radios[chain.radio]
    if not isinstance(own, DownlinkRadio):
        return 0.0
    half, other = _band_mhz(own) / 2.0, _band_mhz(radio) / 2.0
    low = max(own.frequency_mhz - half, radio.frequency_mhz - other)
    high = min(own.frequency_mhz + half, radio.frequency_mhz + other)
    return max(high - low, 0.0) / (2.0 * other)


def _band_mhz(radio: DownlinkRadio) -> float:
    return radio.symbol_rate_msps * (1.0 + radio.roll_off)


def _of_pair(
    run: Run, names: tuple[str, str, str], chain: Chain, samples: Samples, rows: list[int], required_db: float
) -> Iterator[InterferencePair]:
    victim, antenna, interferer = names
    site = run.sites[run.antennas[antenna].site]
    sizes = [int(samples.offsets[row + 1] - samples.offsets[row]) for row in rows]
    offsets = np.concatenate(([0], np.cumsum(sizes))).astype(np.int64)
    pick = np.concatenate([np.arange(samples.offsets[row], samples.offsets[row + 1]) for row in rows])
    time_s = samples.time_s[pick]
    wanted = LookAngles(
        samples.azimuth_deg[pick], samples.elevation_deg[pick], samples.range_km[pick], samples.range_rate_km_s[pick]
    )
    refraction = run.policy.refraction != "off"
    other = look_angles(run.orbits[interferer], site, _instants(run, time_s), refraction=refraction)
    away = pointing_vectors(wanted.azimuth_deg, wanted.elevation_deg) - pointing_vectors(
        other.azimuth_deg, other.elevation_deg
    )
    parts = [slice(a, b) for a, b in zip(offsets[:-1].tolist(), offsets[1:].tolist(), strict=True)]
    apart_deg = np.concatenate([closest_deg(away[part]) for part in parts])
    ratio_db = c_over_i_db(run, chain, interferer, site, (wanted, other), apart_deg)
    # Finite, so that lines between samples mean something; 200 dB is no interference at all.
    trouble_db = required_db - np.minimum(np.nan_to_num(ratio_db, nan=200.0), 200.0)
    found = find_stretches(time_s, trouble_db, offsets, np.array([1e-9]))
    for first_s, last_s in zip(found.first_s.tolist(), found.last_s.tolist(), strict=True):
        start_s, end_s = math.floor(first_s), math.ceil(last_s)
        near = (time_s >= start_s - 10.0) & (time_s <= end_s + 10.0)
        worst_db = float(np.min(ratio_db[near]))
        yield InterferencePair(victim, antenna, interferer, start_s, max(end_s, start_s + 1), worst_db)


def _downlinks(run: Run, spacecraft: str, antenna: str) -> list[Chain]:
    return [chain for chain in chains_between(run, spacecraft, antenna) if chain.direction == "downlink"]


def _radios(run: Run, spacecraft: str) -> list[DownlinkRadio]:
    radios = (run.radios[name] for name in run.spacecraft[spacecraft].radios)
    return [radio for radio in radios if isinstance(radio, DownlinkRadio)]


def _overlapping(run: Run, chain: Chain, interferer: str) -> bool:
    return any(spectrum_share(run, chain, radio) > 0.0 for radio in _radios(run, interferer))


def _aboard(pattern: tuple[tuple[float, float], ...], look: LookAngles, site: Site) -> Floats | float:
    if not pattern:
        return 0.0
    return pattern_loss_db(pattern, off_nadir_deg(look.elevation_deg, look.range_km, site.latitude_deg, site.height_m))


def _discrimination_db(own: str, other: str) -> float:
    if own == other:
        return 0.0
    return CROSS_POLAR_DB if (own in ("H", "V")) == (other in ("H", "V")) else _LINEAR_CIRCULAR_DB


def _instants(run: Run, time_s: Floats) -> NDArray[np.datetime64]:
    return run.start_utc + np.rint(time_s * 1e3).astype("timedelta64[ms]")
