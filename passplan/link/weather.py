"""Rain, cloud and scintillation on a slant path (ITU-R P.618-13, P.837-7, P.838-3, P.839-4, P.840-8, P.453).

They come from the propagation package on a grid of elevations, once per path, and are cached:

    elevation    0 ..... 2.9 ..... 5 .............. 90 deg
    rain         P.618, section 2.2.1.1, with its own form below 5
    cloud        as at 2.9 | 1 / sin(el), stated from 5 on
    scintillation as at 2.9 | P.618, section 2.4.1, stated from 5 on

P.618 has small steps in its rain, at 5 deg where its two forms of the path length meet and at 25 deg where an
exponent changes; tables bridge them within 0.02 deg, so that a link is continuous along a pass. Overhead it
falls as the square root of the distance from the zenith, so nodes crowd together there. These are long-term
statistics, not a forecast.
"""

from __future__ import annotations

import math
import warnings
from dataclasses import dataclass
from functools import lru_cache
from typing import NamedTuple

import numpy as np

from passplan.link.budget import Floats

LOWEST_HELD_DEG = 2.9
"""Below this elevation cloud and scintillation are held at their value here."""

# Close together where attenuation changes fast, and on both sides of the edges of P.618's branches.
NODES_DEG: Floats = np.unique(np.concatenate((
    np.arange(500) / 50.0, 90.0 - (np.arange(1491) * np.sqrt(80.0) / 1490.0) ** 2, [5.0 - 1e-6, 5.0, 25.0 - 1e-6, 25.0],
)))

_RAIN_PERCENT = (0.001, 5.0)
_CLOUD_PERCENT = (1.0, 99.0)
_SCINTILLATION_PERCENT = (0.01, 50.0)


@dataclass(frozen=True)
class WeatherPath:
    """What the models need: place, frequency, polarisation tilt, time percentage and the receiving dish.

    ``tilt_deg`` is against the horizontal (45 for circular). ``percent`` is the share of an average year in
    which the attenuation is exceeded; None counts neither cloud nor scintillation. ``rain_rate_mm_per_h``
    replaces the statistics of rain. A ``diameter_m`` of 0 averages no scintillation away.
    """

    latitude_deg: float
    longitude_deg: float
    height_km: float
    frequency_ghz: float
    tilt_deg: float
    percent: float | None
    rain_rate_mm_per_h: float | None = None
    diameter_m: float = 0.0
    efficiency: float = 0.6


class SiteConstants(NamedTuple):
    """What the maps say of a site: rain rate exceeded for 0.01 % [mm/h], rain height [km], time with rain [%],
    water vapour column [kg/m2] and density at the surface [g/m3] at the time percentage, wet refractivity."""

    rain_rate_mm_per_h: float
    rain_height_km: float
    rain_percent: float
    vapour_column_kg_per_m2: float
    vapour_density_g_per_m3: float
    wet_refractivity: float


class WeatherTable(NamedTuple):
    """Rain, cloud and scintillation [dB], shape (3, nodes), at ``NODES_DEG``, and the site's constants."""

    nodes_db: Floats
    constants: SiteConstants


def weather_table(path: WeatherPath) -> WeatherTable:
    """The table of one path, straight from the propagation package (slow to import: seconds)."""
    with warnings.catch_warnings(), np.errstate(all="ignore"):
        warnings.simplefilter("ignore")
        # P.618, section 2.5: below 1 %, gas and cloud are those of 1 %.
        percent = float(np.clip(50.0 if path.percent is None else path.percent, *_CLOUD_PERCENT))
        constants = site_constants(path.latitude_deg, path.longitude_deg, path.height_km, percent)
        rain_db = _rain(path, constants)
        cloud_db, scintillation_db = np.zeros_like(rain_db), np.zeros_like(rain_db)
        if path.percent is not None:
            held = np.maximum(NODES_DEG, LOWEST_HELD_DEG)
            cloud_db = _cloud_zenith(path, path.percent) / np.sin(np.radians(held))
            scintillation_db = _scintillation(path, path.percent, held)
    nodes = np.vstack((rain_db, cloud_db, scintillation_db))
    return WeatherTable(np.nan_to_num(np.maximum(nodes, 0.0)), constants)


@lru_cache(maxsize=1_024)
def site_constants(latitude_deg: float, longitude_deg: float, height_km: float, percent: float) -> SiteConstants:
    """What the maps say of a place; ``percent`` (of an average year) is that of the water vapour."""
    from itur.models import itu453, itu836, itu837, itu839

    place = (latitude_deg, longitude_deg)
    found = (
        itu837.rainfall_rate(*place, 0.01), itu839.rain_height(*place), itu837.rainfall_probability(*place),
        itu836.total_water_vapour_content(*place, percent, height_km),
        itu836.surface_water_vapour_density(*place, percent, height_km),
        itu453.map_wet_term_radio_refractivity(*place, 50),
    )
    return SiteConstants(*(float(np.ravel(item.value)[0]) for item in found))


def _rain(path: WeatherPath, constants: SiteConstants) -> Floats:
    """Rain attenuation [dB] at the nodes; beyond 5 % of the year it fades out towards the time with rain.

    P.618 states 0.001 to 5 %. Between 5 % and the share of time with rain it falls here along the logarithm
    of the percentage to nothing (own choice, no source), and from there on there is none.
    """
    rate = path.rain_rate_mm_per_h
    if rate is not None:
        # Steps 4 to 9 with the given rate in place of the one exceeded for 0.01 % of the time.
        return _rain_attenuation(path, 0.01, rate) if rate > 0.0 else np.zeros_like(NODES_DEG)
    if path.percent is None:
        return np.zeros_like(NODES_DEG)
    least, most = _RAIN_PERCENT
    rain_db = _rain_attenuation(path, float(np.clip(path.percent, least, most)), constants.rain_rate_mm_per_h)
    if path.percent > most:
        span = math.log(max(constants.rain_percent, most) / most)
        left = 0.0 if span == 0.0 else max(0.0, 1.0 - math.log(path.percent / most) / span)
        rain_db = rain_db * left
    return rain_db


def _rain_attenuation(path: WeatherPath, percent: float, rate_mm_per_h: float) -> Floats:
    from itur.models import itu618

    # A rate of zero has no logarithm; the package itself adds a little to what it reads from its maps.
    found = itu618.rain_attenuation(
        path.latitude_deg, path.longitude_deg, path.frequency_ghz, NODES_DEG, hs=path.height_km, p=percent,
        R001=max(rate_mm_per_h, 1e-9), tau=path.tilt_deg,
    )
    return np.asarray(found.value, np.float64)


def _cloud_zenith(path: WeatherPath, percent: float) -> float:
    from itur.models import itu840

    clipped = float(np.clip(percent, *_CLOUD_PERCENT))
    found = itu840.cloud_attenuation(path.latitude_deg, path.longitude_deg, 90.0, path.frequency_ghz, clipped)
    return float(np.ravel(found.value)[0])


def _scintillation(path: WeatherPath, percent: float, elevation_deg: Floats) -> Floats:
    from itur.models import itu618

    if percent > _SCINTILLATION_PERCENT[1]:
        return np.zeros_like(elevation_deg)
    found = itu618.scintillation_attenuation(
        path.latitude_deg, path.longitude_deg, path.frequency_ghz, elevation_deg,
        max(percent, _SCINTILLATION_PERCENT[0]), path.diameter_m, path.efficiency,
    )
    return np.asarray(found.value, np.float64)
