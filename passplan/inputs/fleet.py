"""What the user says of the spacecraft and of the radios they carry."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from passplan.inputs.ageing import Ageing
from passplan.inputs.craft_limits import CraftLimits
from passplan.inputs.craft_power import CraftPower
from passplan.inputs.generation import Generation
from passplan.inputs.records import Curve, Instant, Instants, Name, Names, Polarisation, Record, check_angles
from passplan.inputs.transmit import check_transmit

_Frequency = Annotated[float, Field(ge=100.0, le=50_000.0)]


class DownlinkRadio(Record):
    """A transmitter aboard. EIRP is on boresight; losses are positive numbers.

    Either ``eirp_dbw``, or ``transmit_power_w`` with ``antenna_gain_dbi`` and ``transmit_loss_db``; the
    back-off comes off both. ``pattern`` is a fixed antenna's loss [dB] against the angle off boresight [deg],
    boresight to nadir; without it the antenna is steered at the station. ``rate_control`` says how the
    modcod is chosen: ``fixed`` (the only one of ``modcods``), ``per-contact``, or ``adaptive`` (stepped
    along the pass). ``load_w`` is what it draws while it is on.
    """

    name: Name
    direction: Literal["downlink"]
    frequency_mhz: _Frequency
    polarisation: Polarisation
    eirp_dbw: Annotated[float, Field(ge=-50.0, le=80.0)] | None = None
    transmit_power_w: Annotated[float, Field(gt=0.0, le=10_000.0)] | None = None
    antenna_gain_dbi: Annotated[float, Field(ge=-20.0, le=70.0)] | None = None
    transmit_loss_db: Annotated[float, Field(ge=0.0, le=30.0)] = 0.0
    back_off_db: Annotated[float, Field(ge=0.0, le=30.0)] = 0.0
    pattern: Curve = ()
    symbol_rate_msps: Annotated[float, Field(gt=0.0, le=2_000.0)]
    roll_off: Annotated[float, Field(ge=0.0, le=1.0)] = 0.25
    modcod_table: str = "dvb-s2"
    modcods: Names = ()
    pilots: bool = False
    pointing_loss_db: Annotated[float, Field(ge=0.0, le=20.0)] = 0.0
    implementation_loss_db: Annotated[float, Field(ge=0.0, le=20.0)] = 1.5
    acquisition_s: Annotated[float, Field(ge=0.0, le=600.0)] = 20.0
    rate_control: Literal["fixed", "per-contact", "adaptive"] = "per-contact"
    hysteresis_db: Annotated[float, Field(ge=0.0, le=10.0)] = 0.5
    min_dwell_s: Annotated[int, Field(ge=0, le=600)] = 10
    switching_gap_s: Annotated[int, Field(ge=0, le=60)] = 0
    load_w: Annotated[float, Field(ge=0.0, le=100_000.0)] = 0.0

    @model_validator(mode="after")
    def _consistent(self) -> DownlinkRadio:
        check_transmit(self.eirp_dbw, self.transmit_power_w, self.antenna_gain_dbi, self.transmit_loss_db)
        check_pattern(self.pattern)
        if self.pilots and self.modcod_table != "dvb-s2":
            raise ValueError("pilots are counted for the table dvb-s2 only; count them in your own efficiencies")
        if self.rate_control == "fixed" and len(self.modcods) != 1:
            raise ValueError("rate_control 'fixed' needs exactly one name in modcods; name the one it sends")
        return self


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
    pattern: Curve = ()

    @model_validator(mode="after")
    def _consistent(self) -> CommandRadio:
        check_pattern(self.pattern)
        return self


def check_pattern(pattern: tuple[tuple[float, float], ...]) -> None:
    """Raise ValueError where a fixed antenna's pattern makes no sense."""
    check_angles(pattern, 180.0)
    if any(loss_db < 0.0 for _, loss_db in pattern):
        raise ValueError("the losses of the pattern are positive numbers; correct the curve")


Radio = Annotated[DownlinkRadio | CommandRadio, Field(discriminator="direction")]


class Spacecraft(CraftLimits, CraftPower, Ageing, Generation):
    """One spacecraft: its orbit source, its radios by name, its storage and what its data is worth.

    The orbit comes from ``catalogue_number`` (looked up among the run's element sets), or from a file
    that the spacecraft names itself: ``elements_file`` (one element set) or ``ephemeris_file`` (an OEM,
    which takes precedence). Weight, generation and fill are those of all its data, unless classes of data name it
    (see :mod:`passplan.inputs.data`). ``overflow`` says what a full storage loses of the class worth least, and
    ``acknowledged_by`` when what was sent makes room: as it is sent, at the end of its contact, or at that of the next
    command contact. Storage starts the horizon with ``start_fill_mb``. Element sets from before
    one of ``manoeuvres_utc`` are not used after it, nor those from after it before.
    """

    name: Name
    catalogue_number: Annotated[int, Field(ge=1, le=999_999_999)] | None = None
    elements_file: str | None = None
    ephemeris_file: str | None = None
    mission: str = ""
    radios: Names = ()
    weight: Annotated[float, Field(ge=0.0, le=1e6)] = 1.0
    storage_mb: Annotated[float, Field(ge=0.0, le=1e9)] = 0.0
    overflow: Literal["oldest", "newest"] = "oldest"
    acknowledged_by: Literal["contact", "next_command"] | None = None
    start_fill_mb: Annotated[float, Field(ge=0.0, le=1e9)] = 0.0
    command_every_h: Annotated[float, Field(gt=0.0, le=240.0)] | None = None
    last_command_utc: Instant | None = None
    loaded_until_utc: Instant | None = None
    least_contacts_per_day: Annotated[int, Field(ge=1, le=1_000)] | None = None
    least_mb_per_day: Annotated[float, Field(gt=0.0, le=1e9)] | None = None
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
