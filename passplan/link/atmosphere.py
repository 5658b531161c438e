"""Attenuation on a slant path: oxygen and water vapour here (ITU-R P.676-12, Annex 2), weather added to it.

The zenith attenuations come once per site and frequency from the propagation package and are cached;
their growth towards the horizon is a formula here:

    elevation    90 ........ 5 ..... 3 ..... 0 .... -5 deg
    law          zenith / sin(el)  | curved layer | as at 0
                 in range | beyond the stated range of Annex 2

Between 3 and 5 deg the plane-layer law is kept although Annex 2 states it from 5 deg on: it errs on the
safe side there (at 3 deg and 8.2 GHz by 12 % against the layer-by-layer sum of Annex 1). Below 3 deg it
would run away to infinity, so the curved-layer form of P.676-11 takes over, scaled to join without a step.
"""

from __future__ import annotations

import warnings
from collections.abc import Iterable
from dataclasses import astuple, dataclass, replace

import numpy as np
from numpy.typing import ArrayLike

from passplan.inputs.ground import Site
from passplan.link.budget import Floats
from passplan.link.gas_cache import Row, cache_folder, load_rows, save_rows
from passplan.link.weather import NODES_DEG, SiteConstants, WeatherPath
from passplan.link.weather_cache import cached_weather

LOWEST_STATED_ELEVATION_DEG = 5.0
"""Below this, P.676-12 Annex 2 does not state its own validity; a budget should say so."""

_LOWEST_FREQUENCY_GHZ = 1.0
_PLANE_LAYER_FROM_DEG = 3.0
# Effective Earth radius for radio paths in P.676-11, Annex 2, section 2.2.2.
_EARTH_RADIUS_KM = 8_500.0


Quantity = float | Floats


@dataclass(frozen=True)
class ZenithGas:
    """Zenith attenuations [dB] of oxygen and water vapour, and their equivalent heights [km].

    Numbers for one site and frequency, or arrays with one entry per sample.
    """

    oxygen_db: Quantity
    vapour_db: Quantity
    oxygen_height_km: Quantity
    vapour_height_km: Quantity


@dataclass(frozen=True)
class Weather:
    """Air at the site: pressure [hPa], temperature [K] and water vapour density [g/m3] at the surface.

    Where the water vapour integrated up to the zenith [kg/m2] was measured or taken from a map, it gives
    the better vapour attenuation; the height above sea level [km] counts only together with it.
    """

    pressure_hpa: float
    temperature_k: float
    water_vapour_g_per_m3: float
    vapour_column_kg_per_m2: float | None = None
    height_km: float = 0.0


def surface_weather(site: Site) -> Weather:
    """The site's own figures, and where it states none the mean annual reference atmosphere at its height.

    Source: ITU-R P.835-6, section 1, troposphere up to 11 km of geopotential height: T = 288.15 - 6.5 h,
    P = 1013.25 (288.15 / T)^(-34.1632 / 6.5), water vapour 7.5 exp(-h / 2 km).
    """
    height_km = site.height_m / 1_000.0
    geopotential_km = 6356.766 * height_km / (6356.766 + height_km)
    temperature_k = 288.15 - 6.5 * geopotential_km
    pressure_hpa = 1013.25 * (288.15 / temperature_k) ** (-34.1632 / 6.5)
    vapour = 7.5 * float(np.exp(-height_km / 2.0))
    return Weather(
        pressure_hpa if site.pressure_hpa is None else site.pressure_hpa,
        temperature_k if site.temperature_k is None else site.temperature_k,
        vapour if site.water_vapour_g_per_m3 is None else site.water_vapour_g_per_m3,
    )


def zenith_gas(frequency_mhz: float, weather: Weather) -> Row:
    """The figures of :class:`ZenithGas`, straight from the propagation package (slow to import: seconds).

    Source: ITU-R P.676-12, Annex 2, through ``itur``: specific attenuation summed over the lines of
    Annex 1, times the equivalent heights of section 2.2; with a known vapour column, the vapour term of
    section 2.3 instead. Stated for 1 to 350 GHz; below 1 GHz the figure at 1 GHz is taken, which is more
    than the truth by a few hundredths of a dB at zenith. A term that a fit brings below zero counts as none.
    """
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        from itur.models import itu676

        frequency_ghz = max(frequency_mhz / 1_000.0, _LOWEST_FREQUENCY_GHZ)
        surface = (weather.pressure_hpa, weather.water_vapour_g_per_m3, weather.temperature_k)
        heights = itu676.slant_inclined_path_equivalent_height(frequency_ghz, *surface)
        dry_km, wet_km = (float(height.value) for height in heights)
        dry_db = float(itu676.gamma0_exact(frequency_ghz, *surface).value) * dry_km
        wet_db = float(itu676.gammaw_exact(frequency_ghz, *surface).value) * wet_km
        if weather.vapour_column_kg_per_m2:
            column = (weather.vapour_column_kg_per_m2, weather.height_km)
            # Latitude, longitude and time percentage serve only to look the column up where it is unknown.
            found = itu676.zenit_water_vapour_attenuation(0.0, 0.0, 50.0, frequency_ghz, *column)
            wet_db = float(np.ravel(found.value)[0])
    return max(dry_db, 0.0), max(wet_db, 0.0), dry_km, wet_km


def gas_tables(wanted: Iterable[tuple[Site, float]]) -> dict[tuple[str, float], ZenithGas]:
    """Zenith attenuation of each (site, frequency in MHz), keyed by (site name, frequency).

    Read from the cache where it holds them; the others are computed and the cache is brought up to date.
    """
    places = {(site.name, frequency_mhz): (frequency_mhz, surface_weather(site)) for site, frequency_mhz in wanted}
    found = gas_of(places.values())
    return {key: found[place] for key, place in places.items()}


def gas_of(wanted: Iterable[tuple[float, Weather]]) -> dict[tuple[float, Weather], ZenithGas]:
    """Zenith attenuation of each (frequency in MHz, air at the surface), cached as :func:`gas_tables` says."""
    cached = load_rows()
    fresh: dict[str, Row] = {}
    found: dict[tuple[float, Weather], ZenithGas] = {}
    for frequency_mhz, weather in dict.fromkeys(wanted):
        key = _key(frequency_mhz, weather)
        row = cached.get(key)
        if row is None:
            row = fresh[key] = zenith_gas(frequency_mhz, weather)
        found[frequency_mhz, weather] = ZenithGas(*row)
    if fresh:
        save_rows(cached | fresh)
    return found


def gas_attenuation_db(gas: ZenithGas, elevation_deg: ArrayLike) -> Floats:
    """Slant attenuation [dB] at an elevation [deg]; the fields of ``gas`` and the elevation broadcast.

    Never rises with elevation and has no step in it. Sources: the module's docstring.
    """
    elevation = np.asarray(elevation_deg, np.float64)
    plane = 1.0 / np.sin(np.radians(np.maximum(elevation, _PLANE_LAYER_FROM_DEG)))
    slant = np.asarray((gas.oxygen_db + gas.vapour_db) * plane)
    low = elevation < _PLANE_LAYER_FROM_DEG
    if not np.any(low):
        return slant
    if isinstance(gas.oxygen_db, float) and elevation.ndim == 1:
        # The curved layer is dear, and few samples are that low.
        few = elevation[low]
        oxygen_db = gas.oxygen_db * _growth(few, gas.oxygen_height_km)
        slant[low] = oxygen_db + gas.vapour_db * _growth(few, gas.vapour_height_km)
        return slant
    oxygen_db = gas.oxygen_db * _growth(elevation, gas.oxygen_height_km)
    vapour_db = gas.vapour_db * _growth(elevation, gas.vapour_height_km)
    return np.asarray(np.where(low, oxygen_db + vapour_db, slant))


@dataclass(frozen=True)
class SkyPath:
    """A path through the air over a site: frequency, polarisation, what to count, and the receiving dish.

    Without ``percent`` (of an average year) and without a rain rate at the site, gas alone is counted.
    """

    site: Site
    frequency_mhz: float
    polarisation: str = "RHCP"
    percent: float | None = None
    diameter_m: float = 0.0
    efficiency: float = 0.6

    @property
    def wet(self) -> bool:
        """Whether rain is counted."""
        return self.percent is not None or self.site.rain_rate_mm_per_h is not None


@dataclass(frozen=True)
class Attenuations:
    """Attenuation [dB] by cause, one array each over the elevations asked for."""

    gas_db: Floats
    rain_db: Floats
    cloud_db: Floats
    scintillation_db: Floats

    @property
    def total_db(self) -> Floats:
        """A_G + sqrt((A_R + A_C)^2 + A_S^2) (ITU-R P.618-13, section 2.5)."""
        return np.asarray(self.gas_db + np.hypot(self.rain_db + self.cloud_db, self.scintillation_db))

    @property
    def absorbed_db(self) -> Floats:
        """The part that also radiates: all but scintillation (P.618-13, section 3)."""
        return np.asarray(self.gas_db + self.rain_db + self.cloud_db)


@dataclass(frozen=True, eq=False)
class Sky:
    """Attenuation against elevation on one path; ``clear`` is the gas of the mean atmosphere without weather."""

    gas: ZenithGas
    clear: ZenithGas
    nodes_db: Floats | None = None
    constants: SiteConstants | None = None

    def at(self, elevation_deg: ArrayLike) -> Attenuations:
        """Attenuations at elevations [deg]; below the horizon as at the horizon."""
        elevation = np.asarray(elevation_deg, np.float64)
        gas_db = gas_attenuation_db(self.gas, elevation)
        if self.nodes_db is None:
            nothing = np.zeros_like(gas_db)
            return Attenuations(gas_db, nothing, nothing, nothing)
        return Attenuations(gas_db, *(np.asarray(np.interp(elevation, NODES_DEG, row)) for row in self.nodes_db))

    def clear_db(self, elevation_deg: ArrayLike) -> Floats:
        """Gas attenuation of the mean atmosphere [dB]."""
        return gas_attenuation_db(self.clear, elevation_deg)


# Looked up again and again within one run, and small; the folder is part of the key, as tests move it.
_skies: dict[tuple[object, SkyPath], Sky] = {}
_MOST_SKIES = 4_096


def skies(paths: Iterable[SkyPath]) -> dict[SkyPath, Sky]:
    """The sky over each path, from the caches where they hold it.

    With a time percentage, gas too is that of the percentage: water vapour of ITU-R P.836 exceeded for it
    (for 1 % where it is below 1 %, P.618 section 2.5); without one it is the mean atmosphere.
    """
    folder, wanted = cache_folder(), list(dict.fromkeys(paths))
    if len(_skies) > _MOST_SKIES:
        _skies.clear()
    missing = [path for path in wanted if (folder, path) not in _skies]
    tables = {path: cached_weather(_weather_path(path)) for path in missing if path.wet}
    airs = {path: surface_weather(path.site) for path in missing}
    damp = {path: airs[path] for path in missing}
    for path, table in tables.items():
        if path.percent is not None:
            column, density = table.constants.vapour_column_kg_per_m2, table.constants.vapour_density_g_per_m3
            damp[path] = replace(
                airs[path], water_vapour_g_per_m3=density, vapour_column_kg_per_m2=column,
                height_km=path.site.height_m / 1_000.0,
            )
    gas = gas_of((path.frequency_mhz, air) for path in missing for air in (airs[path], damp[path])) if missing else {}
    for path in missing:
        found, clear = gas[path.frequency_mhz, damp[path]], gas[path.frequency_mhz, airs[path]]
        weather = tables.get(path)
        _skies[folder, path] = Sky(found, clear) if weather is None else Sky(found, clear, *weather)
    return {path: _skies[folder, path] for path in wanted}


def _weather_path(path: SkyPath) -> WeatherPath:
    site, tilt_deg = path.site, {"H": 0.0, "V": 90.0}.get(path.polarisation, 45.0)
    return WeatherPath(
        site.latitude_deg, site.longitude_deg, site.height_m / 1_000.0,
        max(path.frequency_mhz / 1_000.0, _LOWEST_FREQUENCY_GHZ), tilt_deg, path.percent, site.rain_rate_mm_per_h,
        path.diameter_m, path.efficiency,
    )


def _growth(elevation_deg: Floats, height_km: Quantity) -> Floats:
    """Slant over zenith attenuation of a curved layer below 3 deg, scaled to meet 1 / sin there."""
    join = np.asarray(_PLANE_LAYER_FROM_DEG)
    scale = _curved_layer(join, height_km) * np.sin(np.radians(join))
    return np.asarray(_curved_layer(np.clip(elevation_deg, 0.0, _PLANE_LAYER_FROM_DEG), height_km) / scale)


def _curved_layer(elevation_deg: Floats, height_km: Quantity) -> Floats:
    """P.676-11, Annex 2, section 2.2.2: sqrt(Re/h) F(tan(el) sqrt(Re/h)) / cos(el)."""
    root = np.sqrt(_EARTH_RADIUS_KM / height_km)
    x = np.tan(np.radians(elevation_deg)) * root
    shape = 1.0 / (0.661 * x + 0.339 * np.sqrt(x**2 + 5.51))
    return np.asarray(root * shape / np.cos(np.radians(elevation_deg)))


def _key(frequency_mhz: float, weather: Weather) -> str:
    return f"{float(frequency_mhz)!r} {astuple(weather)!r}"
