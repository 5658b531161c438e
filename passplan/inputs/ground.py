"""What the user says of the sites, the antennas on them, and their receive and transmit chains."""

from __future__ import annotations

from itertools import pairwise
from typing import Annotated

from pydantic import Field, model_validator

from passplan.inputs.records import MaskPoints, Name, Names, Polarisations, Record, Sectors

_Frequency = Annotated[float, Field(ge=100.0, le=50_000.0)]


class Site(Record):
    """A place with antennas. Height is above the WGS 84 ellipsoid; longitude is east-positive.

    The three weather values feed the gas attenuation; where they are absent the link floor takes the
    mean annual reference atmosphere.
    """

    name: Name
    latitude_deg: Annotated[float, Field(ge=-90.0, le=90.0)]
    longitude_deg: Annotated[float, Field(ge=-180.0, le=360.0)]
    height_m: Annotated[float, Field(ge=-500.0, le=9_000.0)] = 0.0
    pressure_hpa: Annotated[float, Field(ge=300.0, le=1_100.0)] | None = None
    temperature_k: Annotated[float, Field(ge=200.0, le=330.0)] | None = None
    water_vapour_g_per_m3: Annotated[float, Field(ge=0.0, le=50.0)] | None = None


class Receiver(Record):
    """A receive chain: the band and polarisations it takes, and G/T, or gain and system noise temperature."""

    name: Name
    low_mhz: _Frequency
    high_mhz: _Frequency
    polarisations: Polarisations
    g_over_t_db_per_k: Annotated[float, Field(ge=-30.0, le=70.0)] | None = None
    gain_dbi: Annotated[float, Field(ge=0.0, le=90.0)] | None = None
    noise_temperature_k: Annotated[float, Field(gt=0.0, le=10_000.0)] | None = None
    pointing_loss_db: Annotated[float, Field(ge=0.0, le=20.0)] = 0.0

    @model_validator(mode="after")
    def _consistent(self) -> Receiver:
        _check_band(self.low_mhz, self.high_mhz)
        built = self.gain_dbi is not None and self.noise_temperature_k is not None
        partly = self.gain_dbi is not None or self.noise_temperature_k is not None
        if (self.g_over_t_db_per_k is None) != built or (self.g_over_t_db_per_k is not None and partly):
            raise ValueError("give either g_over_t_db_per_k, or both gain_dbi and noise_temperature_k")
        return self


class Transmitter(Record):
    """A transmit chain for commands: the band and polarisations it covers, and its EIRP."""

    name: Name
    low_mhz: _Frequency
    high_mhz: _Frequency
    polarisations: Polarisations
    eirp_dbw: Annotated[float, Field(ge=-20.0, le=100.0)]
    pointing_loss_db: Annotated[float, Field(ge=0.0, le=20.0)] = 0.0

    @model_validator(mode="after")
    def _consistent(self) -> Transmitter:
        _check_band(self.low_mhz, self.high_mhz)
        return self


class Antenna(Record):
    """One antenna: where it stands, what it can hear and say, its mask, and the time around a contact.

    ``mask`` is a table of (azimuth, elevation) points in degrees, joined by straight lines and wrapped
    at north; where it is absent the mask is ``min_elevation_deg`` all round. With both, the higher of
    the two holds. ``prepare_s`` is kept free before a contact and ``release_s`` after it.

    ``mount`` names the mechanics and ``beamwidth_deg`` the half-power width of the narrowest beam; without
    them the antenna follows anything. Commands are sent only above the transmit mask (made as the other,
    and never below it), outside the sectors ``transmit_keep_out`` and further from the geosynchronous arc
    than ``transmit_arc_keep_out_deg``. Nothing is received nearer to the Sun than ``sun_keep_out_deg``.
    """

    name: Name
    site: str
    receivers: Names = ()
    transmitters: Names = ()
    min_elevation_deg: Annotated[float, Field(ge=-5.0, lt=90.0)] = 5.0
    mask: MaskPoints = ()
    mount: str | None = None
    beamwidth_deg: Annotated[float, Field(gt=0.0, le=180.0)] | None = None
    transmit_min_elevation_deg: Annotated[float, Field(ge=-5.0, lt=90.0)] | None = None
    transmit_mask: MaskPoints = ()
    transmit_keep_out: Sectors = ()
    transmit_arc_keep_out_deg: Annotated[float, Field(gt=0.0, le=30.0)] | None = None
    sun_keep_out_deg: Annotated[float, Field(gt=0.0, le=30.0)] | None = None
    prepare_s: Annotated[float, Field(ge=0.0, le=3_600.0)] = 60.0
    release_s: Annotated[float, Field(ge=0.0, le=3_600.0)] = 30.0
    price_per_minute: Annotated[float, Field(ge=0.0, le=1e6)] = 0.0

    @model_validator(mode="after")
    def _consistent(self) -> Antenna:
        for name, points in (("mask", self.mask), ("transmit_mask", self.transmit_mask)):
            _check_mask(name, points)
        for first, last, low, high in self.transmit_keep_out:
            if not (0.0 <= first <= 360.0 and 0.0 <= last <= 360.0):
                raise ValueError("transmit_keep_out azimuths run from 0 to 360 deg; correct the sector")
            if not -5.0 <= low < high <= 90.0:
                raise ValueError("transmit_keep_out elevations rise from -5 to 90 deg; correct the sector")
        sends = ("transmit_min_elevation_deg", "transmit_mask", "transmit_keep_out", "transmit_arc_keep_out_deg")
        stated = [name for name in sends if getattr(self, name) not in (None, ())]
        if stated and not self.transmitters:
            raise ValueError(f"{stated[0]} is about sending, but there are no transmitters; name one or remove it")
        return self


def _check_mask(name: str, points: tuple[tuple[float, float], ...]) -> None:
    azimuths = [azimuth for azimuth, _ in points]
    if any(not 0.0 <= azimuth <= 360.0 for azimuth in azimuths):
        raise ValueError(f"{name} azimuths run from 0 to 360 deg; correct the table")
    if any(not -5.0 <= elevation < 90.0 for _, elevation in points):
        raise ValueError(f"{name} elevations lie from -5 to 90 deg; correct the table")
    if any(b < a for a, b in pairwise(azimuths)):
        raise ValueError(f"{name} azimuths must not decrease; sort the table")


def _check_band(low_mhz: float, high_mhz: float) -> None:
    if low_mhz > high_mhz:
        raise ValueError(f"low_mhz {low_mhz:g} is above high_mhz {high_mhz:g}; swap them")
