"""How near the Sun comes to the beam along a pass, and what that costs.

A narrow beam sweeps over the Sun in seconds, between two samples 10 s apart. So each sample takes the nearest
approach on the way from the sample before to the sample after: a crossing is never missed, and is felt a
little longer than it lasts.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from passplan.geometry.refraction import apparent_deg
from passplan.geometry.sun import local_axes, pointing_vectors, sun_direction
from passplan.inputs.ground import Site
from passplan.link.budget import Floats, sun_noise_k


def nearest_approach_deg(
    site: Site, times_utc: NDArray[np.datetime64], azimuth_deg: Floats, elevation_deg: Floats, *,
    refraction: bool = False, opens: NDArray[np.bool_] | None = None,
) -> Floats:
    """Least angle [deg] between the Sun and the pointing from the sample before to the sample after, shape (n,).

    The Sun below the horizon disturbs nobody: 180 deg. With ``refraction`` the pointing is apparent. Samples of
    several passes may lie end to end: each that begins one is marked in ``opens``.
    """
    sun = sun_seen(site, times_utc, refraction=refraction)
    angle = closest_deg(pointing_vectors(azimuth_deg, elevation_deg) - sun, opens)
    return np.asarray(np.where(sun[:, 2] > 0.0, angle, 180.0))


def sun_seen(site: Site, times_utc: NDArray[np.datetime64], *, refraction: bool = False) -> Floats:
    """Unit vectors (east, north, up), shape (n, 3), to the Sun; with ``refraction`` where it appears (P.834)."""
    sun = _direction(times_utc) @ local_axes(site).T
    if not refraction:
        return np.asarray(sun)
    elevation_deg = np.degrees(np.arcsin(np.clip(sun[:, 2], -1.0, 1.0)))
    azimuth_deg = np.degrees(np.arctan2(sun[:, 0], sun[:, 1]))
    return pointing_vectors(azimuth_deg, apparent_deg(elevation_deg, site.height_m / 1e3))


def _direction(times_utc: NDArray[np.datetime64]) -> Floats:
    """Direction of the Sun, Earth-fixed, (n, 3); many times are joined by straight lines from minute to minute.

    In a minute the Sun moves by 0.25 deg, and is off the line by 0.0002 deg at most.
    """
    times_s = times_utc.astype("datetime64[ms]").astype(np.int64) / 1e3
    if times_s.size == 0:
        return np.zeros((0, 3))
    minutes = np.arange(np.floor(times_s.min() / 60.0), np.ceil(times_s.max() / 60.0) + 1.0)
    if minutes.size >= times_s.size:
        return sun_direction(times_utc)
    known = sun_direction((60_000.0 * minutes).astype(np.int64).astype("datetime64[ms]"))
    return np.column_stack([np.interp(times_s, 60.0 * minutes, column) for column in known.T])


def closest_deg(away: Floats, opens: NDArray[np.bool_] | None = None) -> Floats:
    """Least angle [deg] between two directions from the sample before to the one after, shape (n,).

    ``away`` (n, 3) is the difference of their unit vectors; between samples it runs along straight lines, but
    for those marked in ``opens``, which have no sample before them.
    """
    nearest = np.linalg.norm(away, axis=1)
    if len(away) > 1:
        between = way_between(away[:-1], away[1:])
        if opens is not None:
            between[opens[1:]] = np.inf
        nearest[:-1] = np.minimum(nearest[:-1], between)
        nearest[1:] = np.minimum(nearest[1:], between)
    return np.asarray(np.degrees(2.0 * np.arcsin(np.clip(nearest / 2.0, 0.0, 1.0))))


def way_between(before: Floats, after: Floats) -> Floats:
    """Least length of vectors (n, 3) on their straight way from ``before`` to ``after``."""
    step = after - before
    length2 = np.maximum(np.einsum("ij,ij->i", step, step), 1e-30)
    share = np.clip(-np.einsum("ij,ij->i", before, step) / length2, 0.0, 1.0)
    return np.asarray(np.linalg.norm(before + share[:, None] * step, axis=1))


def sun_loss_db(
    frequency_mhz: float, beamwidth_deg: float, separation_deg: Floats, noise_k: Floats, feeder_loss_db: float = 0.0
) -> Floats:
    """Fall of G/T [dB] by the Sun at a separation [deg], from the system noise [K] without it."""
    rise_k = sun_noise_k(frequency_mhz, separation_deg, beamwidth_deg) * 10.0 ** (-feeder_loss_db / 10.0)
    return np.asarray(10.0 * np.log10(1.0 + rise_k / noise_k))
