"""States from an orbit ephemeris message, interpolated as the message says and never beyond its span."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from passplan.geometry.frames import EARTH_RATE_RAD_S, INERTIAL_FRAMES, inertial_to_itrf, teme_to_itrf
from passplan.geometry.regimes import Regime, regime_of_state
from passplan.geometry.timescale import Floats, system_minus_utc_s
from passplan.inputs.ephemeris import Ephemeris, EphemerisSegment

# Spans are known to the resolution of utc_s, so their ends are taken with a microsecond's grace.
_EDGE_S = 1e-6


def segment_span(segment: EphemerisSegment) -> tuple[float, float]:
    """First and last ``utc_s`` that the segment answers for."""
    low = max(segment.usable_start, float(segment.epochs[0]))
    high = min(segment.usable_stop, float(segment.epochs[-1]))
    edges = np.array([low, high])
    utc = edges - system_minus_utc_s(segment.time_system, edges)
    # The offset depends on UTC itself; a second turn settles times next to a leap second.
    utc = edges - system_minus_utc_s(segment.time_system, utc)
    return float(utc[0]), float(utc[1])


def segment_itrf(segment: EphemerisSegment, utc_s: Floats) -> tuple[Floats, Floats]:
    """Earth-fixed position (n, 3) in km and velocity in km/s; NaN more than a microsecond outside the usable span.

    Frames: ICRF, GCRF and EME2000 (IAU 2000A by Skyfield), TEME (turned by GMST), and ITRF realisations,
    taken as the Earth-fixed frame itself. The reader refuses all others.
    """
    low, high = segment_span(segment)
    positions = np.full((utc_s.size, 3), np.nan)
    velocities = np.full((utc_s.size, 3), np.nan)
    inside = np.flatnonzero((utc_s >= low - _EDGE_S) & (utc_s <= high + _EDGE_S))
    if inside.size:
        times = utc_s[inside]
        own = times + system_minus_utc_s(segment.time_system, times)
        states = interpolate(segment, np.clip(own, segment.epochs[0], segment.epochs[-1]))
        if segment.frame in INERTIAL_FRAMES:
            states = inertial_to_itrf(segment.frame, *states, times)
        elif segment.frame == "TEME":
            states = teme_to_itrf(*states, times)
        positions[inside], velocities[inside] = states
    return positions, velocities


def ephemeris_itrf(ephemeris: Ephemeris, utc_s: Floats) -> tuple[Floats, Floats]:
    """As :func:`segment_itrf` over all segments; where two meet, the later one answers."""
    positions = np.full((utc_s.size, 3), np.nan)
    velocities = np.full((utc_s.size, 3), np.nan)
    for segment in ephemeris.segments:
        low, high = segment_span(segment)
        inside = np.flatnonzero((utc_s >= low - _EDGE_S) & (utc_s <= high + _EDGE_S))
        if inside.size:
            positions[inside], velocities[inside] = segment_itrf(segment, utc_s[inside])
    return positions, velocities


def ephemeris_regime(ephemeris: Ephemeris) -> Regime:
    """The regime of an ephemeris, from the state in the middle of its first segment."""
    low, high = segment_span(ephemeris.segments[0])
    positions, velocities = segment_itrf(ephemeris.segments[0], np.array([0.5 * (low + high)]))
    # Without the Earth's rotation; the axes may as well be those of the moment.
    inertial = velocities[0] + np.cross([0.0, 0.0, EARTH_RATE_RAD_S], positions[0])
    return regime_of_state(positions[0], inertial)


def interpolate(segment: EphemerisSegment, own_s: Floats) -> tuple[Floats, Floats]:
    """States (n, 3) in the segment's own frame at ``own_s`` (n,), in the segment's own time system.

    LAGRANGE of degree d takes the d + 1 states around the time, HERMITE the (d + 1) / 2 states with
    their velocities, LINEAR two (CCSDS 502.0-B, 5.2.4.6 f.). Velocities are interpolated by Lagrange over
    the same states. Near an end of the segment the states are taken from inside it.
    """
    hermite = segment.interpolation.upper() == "HERMITE"
    degree = 1 if segment.interpolation.upper() == "LINEAR" else max(1, segment.interpolation_degree)
    count = min((degree + 1) // 2 if hermite else degree + 1, segment.epochs.size)
    interval = np.clip(np.searchsorted(segment.epochs, own_s, side="right") - 1, 0, segment.epochs.size - 1)
    first = np.clip(interval - (count - 1) // 2, 0, segment.epochs.size - count)
    index = first[:, None] + np.arange(count)
    spacing = max(float(np.median(np.diff(segment.epochs))), 1e-6) if segment.epochs.size > 1 else 1.0
    nodes = (segment.epochs[index] - own_s[:, None]) / spacing
    lagrange, tilt = _lagrange(nodes)
    velocities = np.einsum("nk,nkj->nj", lagrange, segment.velocities_km_s[index])
    if not hermite:
        return np.einsum("nk,nkj->nj", lagrange, segment.positions_km[index]), velocities
    square = lagrange**2
    place = square * (1.0 + 2.0 * nodes * tilt)
    rate = square * -nodes * spacing
    positions = np.einsum("nk,nkj->nj", place, segment.positions_km[index])
    positions += np.einsum("nk,nkj->nj", rate, segment.velocities_km_s[index])
    return positions, velocities


def _lagrange(nodes: Floats) -> tuple[Floats, Floats]:
    """Lagrange basis at zero for ``nodes`` (n, k), and each basis polynomial's slope at its own node."""
    count = nodes.shape[1]
    basis: NDArray[np.float64] = np.ones_like(nodes)
    tilt: NDArray[np.float64] = np.zeros_like(nodes)
    for i in range(count):
        for k in range(count):
            if k != i:
                apart = nodes[:, i] - nodes[:, k]
                basis[:, i] *= -nodes[:, k] / apart
                tilt[:, i] += 1.0 / apart
    return basis, tilt
