"""What a contact's link carries on average over the year, recomputed: within what bounds its rates may be scaled.

The year is cut at the same shares as the plan's (that is the definition of the figure); the quality under each
share is the audit's own. Tolerances in quality and time leave an interval, in which the claim must lie.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace
from itertools import pairwise

import numpy as np

from passplan.inputs.fleet import DownlinkRadio
from passplan.inputs.modcods import Modcod
from passplan.inputs.run import Run
from passplan.planning.audit.mechanics import has_losses
from passplan.planning.audit.quality import Quality, downlink_quality
from passplan.planning.audit.rows import Contact
from passplan.planning.audit.sky import Sight

_SHARES_PERCENT = (0.01, 0.1, 0.3, 1.0, 3.0, 10.0, 30.0, 50.0, 70.0, 90.0, 99.0)
_TOLERANCE_DB = 0.1
_TOLERANCE_S = 2.0
# Gaps, dwell and hysteresis may leave a stepped contact with less than one modcod throughout would carry.
_STEPPING_KEEPS = 0.7


def expectation_bounds(
    run: Run, contact: Contact, radio: DownlinkRadio, rates_mbps: Mapping[str, float], allowed: Mapping[str, Modcod],
    seen: Sight,
) -> tuple[float, float]:
    """Least and greatest expectation of a contact as a multiple of what its modcods carry as planned.

    ``rates_mbps`` are the net rates of the ``allowed`` modcods.
    """
    planned = math.fsum(rates_mbps[piece.modcod] * (piece.end_s - piece.start_s) for piece in contact.pieces)
    edges = [0.0, *((a + b) / 2.0 for a, b in pairwise(_SHARES_PERCENT)), 100.0]
    least = greatest = 0.0
    lossy = has_losses(run, run.antennas[contact.antenna], "downlink")
    for percent, (begin, end) in zip(_SHARES_PERCENT, pairwise(edges), strict=True):
        quality = downlink_quality(_under(run, percent), contact, radio, seen)
        if quality is None:
            continue
        low, high = _carried(run, contact, radio, rates_mbps, allowed, quality)
        least += (end - begin) / 100.0 * (0.0 if lossy else low)
        greatest += (end - begin) / 100.0 * high
    return least / planned, greatest / planned


def _carried(
    run: Run, contact: Contact, radio: DownlinkRadio, rates_mbps: Mapping[str, float], allowed: Mapping[str, Modcod],
    quality: Quality,
) -> tuple[float, float]:
    """Least and greatest of what goes down under one sky [Mbit]."""
    def held(row: Modcod, sign: float) -> float:
        level_db = row.required_esn0_db + run.policy.required_margin_db + sign * _TOLERANCE_DB
        seconds = quality.longest_s(level_db, low=sign > 0.0) - radio.acquisition_s - sign * _TOLERANCE_S
        return rates_mbps[row.name] * max(seconds, 0.0)

    if radio.rate_control != "adaptive":
        row = allowed[contact.pieces[0].modcod]
        return held(row, 1.0), held(row, -1.0)
    seconds = np.arange(math.ceil(contact.start_s), math.floor(contact.end_s))
    ratio_db = np.interp(seconds, quality.time_s, quality.ratio_db) + _TOLERANCE_DB - run.policy.required_margin_db
    best = np.zeros(seconds.size)
    for row in allowed.values():
        best = np.where(ratio_db >= row.required_esn0_db, np.maximum(best, rates_mbps[row.name]), best)
    return _STEPPING_KEEPS * max(held(row, 1.0) for row in allowed.values()), float(best.sum())


def _under(run: Run, percent: float) -> Run:
    """The run under the sky that is exceeded for a share of the year, whatever it rains today."""
    sites = {name: site.model_copy(update={"rain_rate_mm_per_h": None}) for name, site in run.sites.items()}
    return replace(run, sites=sites, policy=run.policy.model_copy(update={"unavailability_percent": percent}))
