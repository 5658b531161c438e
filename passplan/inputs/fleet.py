"""What the user says of the spacecraft and of the radios they carry."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from passplan.inputs.records import Instant, Instants, Name, Names, Polarisation, Record

_Frequency = Annotated[float, Field(ge=100.0, le=50_000.0)]


class DownlinkRadio(Record):
    """A transmitter aboard. EIRP is on boresight; losses are positive numbers."""

    name: Name
    direction: Literal["downlink"]
    frequency_mhz: _Frequency
    polarisation: Polarisation
    eirp_dbw: Annotated[float, Field(ge=-50.0, le=80.0)]
    symbol_rate_msps: Annotated[float, Field(gt=0.0, le=2_000.0)]
    roll_off: Annotated[float, Field(ge=0.0, le=1.0)] = 0.25
    modcod_table: str = "dvb-s2"
    modcods: Names = ()
    pointing_loss_db: Annotated[float, Field(ge=0.0, le=20.0)] = 0.0
    implementation_loss_db: Annotated[float, Field(ge=0.0, le=20.0)] = 1.5
    acquisition_s: Annotated[float, Field(ge=0.0, le=600.0)] = 20.0


class CommandRadio(Record):
    """A command receiver aboard: G/T towards the station, the bit rate, and the Eb/N0 that it needs."""

    name: Name
    direction: Literal["command"]
    frequency_mhz: _Frequency
    polarisation: Polarisation
    g_over_t_db_per_k: Annotated[float, Field(ge=-80.0, le=40.0)]
    bit_rate_kbps: Annotated[float, Field(gt=0.0, le=100_000.0)]
    required_ebn0_db: Annotated[float, Field(ge=-2.0, le=30.0)] = 9.6
    pointing_loss_db: Annotated[float, Field(ge=0.0, le=20.0)] = 0.0
    implementation_loss_db: Annotated[float, Field(ge=0.0, le=20.0)] = 2.0
    acquisition_s: Annotated[float, Field(ge=0.0, le=600.0)] = 20.0


Radio = Annotated[DownlinkRadio | CommandRadio, Field(discriminator="direction")]


class Spacecraft(Record):
    """One spacecraft: its orbit source, its radios by name, its storage and what its data is worth.

    The orbit comes from ``catalogue_number`` (looked up among the run's element sets), or from a file
    that the spacecraft names itself: ``elements_file`` (one element set) or ``ephemeris_file`` (an OEM,
    which takes precedence). Storage starts the horizon with ``start_fill_mb``. Element sets from before
    one of ``manoeuvres_utc`` are not used after it, nor those from after it before.
    """

    name: Name
    catalogue_number: Annotated[int, Field(ge=1, le=999_999_999)] | None = None
    elements_file: str | None = None
    ephemeris_file: str | None = None
    mission: str = ""
    radios: Names = ()
    weight: Annotated[float, Field(ge=0.0, le=1e6)] = 1.0
    generation_mb_per_s: Annotated[float, Field(ge=0.0, le=10_000.0)] = 0.0
    storage_mb: Annotated[float, Field(ge=0.0, le=1e9)] = 0.0
    start_fill_mb: Annotated[float, Field(ge=0.0, le=1e9)] = 0.0
    command_every_h: Annotated[float, Field(gt=0.0, le=240.0)] | None = None
    last_command_utc: Instant | None = None
    manoeuvres_utc: Instants = ()
    element_warn_age_days: Annotated[float, Field(gt=0.0, le=3_650.0)] | None = None
    element_refuse_age_days: Annotated[float, Field(gt=0.0, le=3_650.0)] | None = None

    @model_validator(mode="after")
    def _consistent(self) -> Spacecraft:
        if self.catalogue_number is None and not self.elements_file and not self.ephemeris_file:
            raise ValueError("give catalogue_number, or name an elements_file or an ephemeris_file")
        if self.start_fill_mb > self.storage_mb:
            raise ValueError(f"start_fill_mb {self.start_fill_mb:g} is above storage_mb {self.storage_mb:g}; lower it")
        return self
