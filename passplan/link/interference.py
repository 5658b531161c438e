"""Two spacecraft of the fleet in one beam: how much of the one is heard beside the other.

A spacecraft disturbs only while it sends, and it sends only in a contact of its own; one with several links as if it
sent over all of them. Its own links do not disturb each other. When it would be too much is found in ``conflicts``.
"""

from __future__ import annotations

import math
from collections.abc import Iterable

import numpy as np

from passplan.geometry.pointing import LookAngles
from passplan.inputs.fleet import DownlinkRadio
from passplan.inputs.ground import Receiver, Site
from passplan.inputs.run import Run
from passplan.link.budget import Floats, dish_gain_dbi, free_space_loss_db, off_nadir_deg
from passplan.link.chains import Chain, radiated_dbw
from passplan.link.noise import dish_of
from passplan.link.profiles import pattern_loss_db

CROSS_POLAR_DB = 20.0
"""Discrimination of the orthogonal polarisation within the half-power beam, none outside it (common practice)."""

_LINEAR_CIRCULAR_DB = 3.0103


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
    for radio in downlinks_of(run, interferer):
        share = spectrum_share(run, chain, radio)
        if share > 0.0:
            off_db = peak_dbi - dish_gain_dbi(apart_deg, peak_dbi, width_deg)
            guard_db = np.where(apart_deg <= width_deg, _discrimination_db(chain.polarisation, radio.polarisation), 0.0)
            level_dbw = radiated_dbw(radio) + 10.0 * math.log10(share) - _aboard(radio.pattern, other, site)
            level_dbw = level_dbw - free_space_loss_db(radio.frequency_mhz, other.range_km) - off_db - guard_db
            power_w += 10.0 ** (level_dbw / 10.0)
    power_w *= run.spacecraft[interferer].links
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


def downlinks_of(run: Run, spacecraft: str) -> list[DownlinkRadio]:
    """The radios of a spacecraft that send."""
    radios = (run.radios[name] for name in run.spacecraft[spacecraft].radios)
    return [radio for radio in radios if isinstance(radio, DownlinkRadio)]


def _aboard(pattern: tuple[tuple[float, float], ...], look: LookAngles, site: Site) -> Floats | float:
    if not pattern:
        return 0.0
    return pattern_loss_db(pattern, off_nadir_deg(look.elevation_deg, look.range_km, site.latitude_deg, site.height_m))


def _discrimination_db(own: str, other: str) -> float:
    if own == other:
        return 0.0
    return CROSS_POLAR_DB if (own in ("H", "V")) == (other in ("H", "V")) else _LINEAR_CIRCULAR_DB
