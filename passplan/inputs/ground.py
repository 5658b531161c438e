"""What the user says of the sites, the antennas on them, and their receive and transmit chains."""

from __future__ import annotations

from itertools import pairwise
from typing import Annotated
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

from pydantic import AfterValidator, Field, model_validator

from passplan.inputs.records import Curve, MaskPoints, Name, Names, Polarisations, Record, Sectors, check_angles
from passplan.inputs.setup_times import SetupTime
from passplan.inputs.site_rules import Backhaul, Pool, Shift
from passplan.inputs.transmit import check_transmit

_Frequency = Annotated[float, Field(ge=100.0, le=50_000.0)]


def _known_zone(name: str) -> str:
    try:
        ZoneInfo(name)
    except (ZoneInfoNotFoundError, ValueError, OSError):
        raise ValueError("not a time zone of the IANA data base; write it as Europe/Oslo") from None
    return name


class Site(Record):
    """A place with antennas. Height is above the WGS 84 ellipsoid; longitude is east-positive.

    ``time_zone`` (IANA name) serves extra, labelled columns of local time, and staffing hours that are stated in it;
    everything else is UTC.

    The three weather values feed the gas attenuation; where they are absent the link floor takes the
    mean annual reference atmosphere. ``rain_rate_mm_per_h`` is a measured or forecast rate that replaces
    the statistics of rain; the run config may state it for the day.

    The antennas may share equipment (``pool``) and a line (``backhaul``). With ``staffed`` there are contacts only
    in those hours, and ``contacts_at_once`` is how many go on at a time, preparing and releasing included.
    """

    name: Name
    latitude_deg: Annotated[float, Field(ge=-90.0, le=90.0)]
    longitude_deg: Annotated[float, Field(ge=-180.0, le=360.0)]
    height_m: Annotated[float, Field(ge=-500.0, le=9_000.0)] = 0.0
    pressure_hpa: Annotated[float, Field(ge=300.0, le=1_100.0)] | None = None
    temperature_k: Annotated[float, Field(ge=200.0, le=330.0)] | None = None
    water_vapour_g_per_m3: Annotated[float, Field(ge=0.0, le=50.0)] | None = None
    rain_rate_mm_per_h: Annotated[float, Field(ge=0.0, le=300.0)] | None = None
    time_zone: Annotated[str, AfterValidator(_known_zone)] | None = None
    pool: tuple[Pool, ...] = ()
    staffed: tuple[Shift, ...] = ()
    contacts_at_once: Annotated[int, Field(ge=0, le=1_000)] | None = None
    backhaul: Backhaul | None = None

    @model_validator(mode="after")
    def _consistent(self) -> Site:
        if self.time_zone is None and any(shift.zone == "site" for shift in self.staffed):
            raise ValueError("staffed hours are in the site's time, but it has none; give time_zone, or zone = \"utc\"")
        names = [pool.name for pool in self.pool]
        repeated = [name for name in names if names.count(name) > 1]
        if repeated:
            raise ValueError(f"two pools are called {repeated[0]!r}; rename one")
        return self


class Receiver(Record):
    """A receive chain: the band and polarisations it takes, and how well it hears.

    One of four ways to say so: ``g_over_t_db_per_k``; ``g_over_t_curve`` against elevation; ``gain_dbi``
    with the whole system's ``noise_temperature_k``; or ``gain_dbi`` with the noise built up from
    ``receiver_noise_k``, ``antenna_noise_k``, ``spill_over_k`` and the feeder, to which sky noise is added.
    A measured figure holds in clear sky, at ``measured_at_deg`` of elevation or, without it, at all of them.
    With G/T, ``noise_temperature_k`` may be given too: it lets rain and the Sun raise the noise. Dish
    ``diameter_m`` and ``beamwidth_deg`` follow from the gain where they are not given.
    """

    name: Name
    low_mhz: _Frequency
    high_mhz: _Frequency
    polarisations: Polarisations
    g_over_t_db_per_k: Annotated[float, Field(ge=-30.0, le=70.0)] | None = None
    gain_dbi: Annotated[float, Field(ge=0.0, le=90.0)] | None = None
    noise_temperature_k: Annotated[float, Field(gt=0.0, le=10_000.0)] | None = None
    g_over_t_curve: Curve = ()
    measured_at_deg: Annotated[float, Field(ge=1.0, le=90.0)] | None = None
    receiver_noise_k: Annotated[float, Field(gt=0.0, le=10_000.0)] | None = None
    antenna_noise_k: Annotated[float, Field(ge=0.0, le=1_000.0)] = 0.0
    spill_over_k: Annotated[float, Field(ge=0.0, le=300.0)] = 0.0
    feeder_loss_db: Annotated[float, Field(ge=0.0, le=20.0)] = 0.0
    feeder_temperature_k: Annotated[float, Field(ge=200.0, le=350.0)] = 290.0
    diameter_m: Annotated[float, Field(gt=0.0, le=100.0)] | None = None
    aperture_efficiency: Annotated[float, Field(gt=0.0, le=1.0)] = 0.6
    beamwidth_deg: Annotated[float, Field(gt=0.0, le=90.0)] | None = None
    pointing_loss_db: Annotated[float, Field(ge=0.0, le=20.0)] = 0.0

    @model_validator(mode="after")
    def _consistent(self) -> Receiver:
        _check_band(self.low_mhz, self.high_mhz)
        check_angles(self.g_over_t_curve, 90.0)
        stated = self.g_over_t_db_per_k is not None or bool(self.g_over_t_curve)
        if self.g_over_t_db_per_k is not None and self.g_over_t_curve:
            raise ValueError("give either g_over_t_db_per_k or g_over_t_curve, not both")
        if stated == (self.gain_dbi is not None):
            raise ValueError("give either g_over_t_db_per_k, or both gain_dbi and noise_temperature_k")
        if not stated and (self.noise_temperature_k is None) == (self.receiver_noise_k is None):
            raise ValueError("with gain_dbi give either noise_temperature_k (the whole system) or receiver_noise_k")
        parts = self.antenna_noise_k or self.spill_over_k or self.feeder_loss_db
        if self.receiver_noise_k is None and parts:
            raise ValueError("antenna, spill-over and feeder are counted only with gain_dbi and receiver_noise_k")
        if stated and self.receiver_noise_k is not None:
            raise ValueError("receiver_noise_k goes with gain_dbi; with G/T give noise_temperature_k")
        if self.measured_at_deg is not None and (self.receiver_noise_k is not None or self.g_over_t_curve):
            raise ValueError("measured_at_deg goes with one measured figure, not with a curve or a built-up noise")
        return self


class Transmitter(Record):
    """A transmit chain for commands: the band and polarisations it covers, and its EIRP, as a radio states it."""

    name: Name
    low_mhz: _Frequency
    high_mhz: _Frequency
    polarisations: Polarisations
    eirp_dbw: Annotated[float, Field(ge=-20.0, le=100.0)] | None = None
    transmit_power_w: Annotated[float, Field(gt=0.0, le=100_000.0)] | None = None
    antenna_gain_dbi: Annotated[float, Field(ge=0.0, le=90.0)] | None = None
    transmit_loss_db: Annotated[float, Field(ge=0.0, le=30.0)] = 0.0
    back_off_db: Annotated[float, Field(ge=0.0, le=30.0)] = 0.0
    pointing_loss_db: Annotated[float, Field(ge=0.0, le=20.0)] = 0.0

    @model_validator(mode="after")
    def _consistent(self) -> Transmitter:
        _check_band(self.low_mhz, self.high_mhz)
        check_transmit(self.eirp_dbw, self.transmit_power_w, self.antenna_gain_dbi, self.transmit_loss_db)
        return self


class Antenna(Record):
    """One antenna: where it stands, what it can hear and say, its mask, the time around a contact, what it costs.

    ``mask`` is a table of (azimuth, elevation) points in degrees, joined by straight lines and wrapped
    at north; where it is absent the mask is ``min_elevation_deg`` all round. With both, the higher of
    the two holds. ``prepare_s`` is kept free before a contact and ``release_s`` after it;
    ``setup`` states other times for some bands and services.

    ``mount`` names the mechanics and ``beamwidth_deg`` the half-power width of the narrowest beam; without
    them the antenna follows anything. Commands are sent only above the transmit mask (made as the other,
    and never below it), outside the sectors ``transmit_keep_out`` and further from the geosynchronous arc
    than ``transmit_arc_keep_out_deg``. Nothing is received nearer to the Sun than ``sun_keep_out_deg``.
    ``wet_radome_loss_db`` is the allowance for a wet radome wherever rain is counted. With ``ranging`` it measures
    range in contacts that both send and receive. ``beams`` is how many contacts it serves at the same time, each with
    its own time to prepare and to release.

    A contact costs ``price_per_contact`` and ``price_per_minute``, each started ``billed_s`` counted whole, and no
    less than ``minimum_charge``. Time on a ``rented`` antenna has to be asked for, ``ask_before_h`` ahead where no
    booking says otherwise.
    """

    name: Name
    site: str
    receivers: Names = ()
    transmitters: Names = ()
    min_elevation_deg: Annotated[float, Field(ge=-5.0, lt=90.0)] = 5.0
    mask: MaskPoints = ()
    mount: str | None = None
    beams: Annotated[int, Field(ge=1, le=1_000)] = 1
    beamwidth_deg: Annotated[float, Field(gt=0.0, le=180.0)] | None = None
    transmit_min_elevation_deg: Annotated[float, Field(ge=-5.0, lt=90.0)] | None = None
    transmit_mask: MaskPoints = ()
    transmit_keep_out: Sectors = ()
    transmit_arc_keep_out_deg: Annotated[float, Field(gt=0.0, le=30.0)] | None = None
    sun_keep_out_deg: Annotated[float, Field(gt=0.0, le=30.0)] | None = None
    wet_radome_loss_db: Annotated[float, Field(ge=0.0, le=20.0)] = 0.0
    prepare_s: Annotated[float, Field(ge=0.0, le=3_600.0)] = 60.0
    release_s: Annotated[float, Field(ge=0.0, le=3_600.0)] = 30.0
    setup: tuple[SetupTime, ...] = ()
    price_per_minute: Annotated[float, Field(ge=0.0, le=1e6)] = 0.0
    price_per_contact: Annotated[float, Field(ge=0.0, le=1e6)] = 0.0
    minimum_charge: Annotated[float, Field(ge=0.0, le=1e6)] = 0.0
    billed_s: Annotated[int, Field(ge=1, le=86_400)] | None = None
    rented: bool = False
    ask_before_h: Annotated[float, Field(ge=0.0, le=8_760.0)] | None = None
    ranging: bool = False

    @model_validator(mode="after")
    def _consistent(self) -> Antenna:
        for name, points in (("mask", self.mask), ("transmit_mask", self.transmit_mask)):
            _check_mask(name, points)
        for first, last, low, high in self.transmit_keep_out:
            if not (0.0 <= first <= 360.0 and 0.0 <= last <= 360.0):
                raise ValueError("transmit_keep_out azimuths run from 0 to 360 deg; correct the sector")
            if not -5.0 <= low < high <= 90.0:
                raise ValueError("transmit_keep_out elevations rise from -5 to 90 deg; correct the sector")
        if self.ask_before_h is not None and not self.rented:
            raise ValueError("ask_before_h is about rented antennas; set rented = true or remove it")
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
