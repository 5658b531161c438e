"""Which chain of an antenna serves which radio of a spacecraft, and everything of it that does not move."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import cached_property, lru_cache
from typing import Literal

from passplan.inputs.fleet import CommandRadio, DownlinkRadio
from passplan.inputs.ground import Antenna, Receiver, Transmitter
from passplan.inputs.matching import matching_loss_db
from passplan.inputs.modcods import Modcod, ModcodTable
from passplan.inputs.modcods_dvb_s2 import pilot_factor
from passplan.inputs.run import Run
from passplan.link.budget import cn0_dbhz, density_ratio_db, eirp_from_power_dbw, net_rate_mbps
from passplan.link.noise import reference_figure_db_per_k


@dataclass(frozen=True)
class Rung:
    """One way to send: its name, its net rate [Mbit/s], and the Es/N0 (command: Eb/N0) it needs [dB]."""

    name: str
    rate_mbps: float
    required_db: float


@dataclass(frozen=True)
class RateControl:
    """How a radio picks its modcod; the three figures are used by ``adaptive`` alone."""

    kind: Literal["fixed", "per-contact", "adaptive"] = "per-contact"
    hysteresis_db: float = 0.0
    min_dwell_s: int = 0
    switching_gap_s: int = 0


@dataclass(frozen=True)
class Chain:
    """A radio aboard with the receiver (command: transmitter) on the ground that serves it best.

    Everything of a budget that does not move: losses are positive; ``rate_hz`` is the symbol rate
    (command: the bit rate). ``rungs`` are in falling order of rate, each needing less than the one before.
    ``pattern`` is the loss of a fixed antenna aboard against the angle off nadir, empty where it is steered.
    ``receiver`` (downlinks) holds what the noise is made of.
    """

    radio: str
    partner: str
    direction: Literal["downlink", "command"]
    frequency_mhz: float
    polarisation: str
    eirp_dbw: float
    pointing_loss_aboard_db: float
    pointing_loss_ground_db: float
    polarisation_loss_db: float
    g_over_t_db_per_k: float
    rate_hz: float
    implementation_loss_db: float
    acquisition_s: float
    rungs: tuple[Rung, ...]
    ionospheric_loss_db: float = 0.0
    wet_radome_loss_db: float = 0.0
    pattern: tuple[tuple[float, float], ...] = ()
    receiver: Receiver | None = None
    control: RateControl = RateControl()

    @cached_property
    def needs_db(self) -> tuple[float, ...]:
        """What the rungs need, in their order [dB]."""
        return tuple(rung.required_db for rung in self.rungs)

    @cached_property
    def merit_db(self) -> float:
        """Es/N0 (command: Eb/N0) after implementation loss, had the path no loss at all [dB].

        Free-space loss, attenuation and what else moves come off it to give the quality on a path.
        """
        loss_db = (
            self.pointing_loss_aboard_db + self.pointing_loss_ground_db + self.polarisation_loss_db
            + self.implementation_loss_db + self.ionospheric_loss_db
        )
        return float(density_ratio_db(cn0_dbhz(self.eirp_dbw, loss_db, self.g_over_t_db_per_k), self.rate_hz))


def radiated_dbw(item: DownlinkRadio | Transmitter) -> float:
    """EIRP on boresight after back-off [dBW], as stated or from power, gain and losses."""
    if item.eirp_dbw is not None:
        return item.eirp_dbw - item.back_off_db
    if item.transmit_power_w is None or item.antenna_gain_dbi is None:
        raise ValueError(f"{item.name!r} states neither EIRP nor power and gain")
    built_dbw = eirp_from_power_dbw(item.transmit_power_w, item.antenna_gain_dbi, item.transmit_loss_db)
    return float(built_dbw) - item.back_off_db


def best_receiver(radio: DownlinkRadio, receivers: Iterable[Receiver]) -> tuple[Receiver, float] | None:
    """The receiver with the best G/T for ``radio`` after pointing and polarisation loss, and the latter.

    Ties go by name. None where no receiver covers the frequency and the polarisation.
    """
    fitting = [(item, loss) for item in receivers if (loss := matching_loss_db(radio, item)) is not None]
    return min(
        fitting,
        key=lambda pair: (pair[0].pointing_loss_db + pair[1] - reference_figure_db_per_k(pair[0]), pair[0].name),
        default=None,
    )


def best_transmitter(radio: CommandRadio, transmitters: Iterable[Transmitter]) -> tuple[Transmitter, float] | None:
    """The transmitter with the best EIRP towards ``radio``, as :func:`best_receiver`."""
    fitting = [(item, loss) for item in transmitters if (loss := matching_loss_db(radio, item)) is not None]
    return min(
        fitting,
        key=lambda pair: (pair[0].pointing_loss_db + pair[1] - radiated_dbw(pair[0]), pair[0].name),
        default=None,
    )


def usable_modcods(radio: DownlinkRadio, table: ModcodTable) -> tuple[Modcod, ...]:
    """The modcods the radio may use (all of the table where it names none), in falling order of efficiency.

    A modcod that needs no less than another one for no more bits can never be the better choice and is
    left out.
    """
    allowed = [row for row in table.rows if not radio.modcods or row.name in radio.modcods]
    kept: list[Modcod] = []
    for row in sorted(allowed, key=lambda m: (-m.efficiency_bit_per_symbol, m.required_esn0_db, m.name)):
        if not kept or row.required_esn0_db < kept[-1].required_esn0_db:
            kept.append(row)
    return tuple(kept)


def chains_between(run: Run, spacecraft: str, antenna: str) -> tuple[Chain, ...]:
    """Every chain between a spacecraft and an antenna, in the order of the spacecraft's radios."""
    ground = run.antennas[antenna]
    receivers = [run.receivers[name] for name in ground.receivers]
    transmitters = [run.transmitters[name] for name in ground.transmitters]
    chains: list[Chain] = []
    for name in run.spacecraft[spacecraft].radios:
        radio = run.radios[name]
        if isinstance(radio, DownlinkRadio):
            receiving = best_receiver(radio, receivers)
            if receiving is not None:
                chains.append(_downlink(run, ground, radio, *receiving))
        else:
            sending = best_transmitter(radio, transmitters)
            if sending is not None:
                chains.append(_command(run, ground, radio, *sending))
    return tuple(chains)


@lru_cache(maxsize=1_024)
def rungs_of(radio: DownlinkRadio, table: ModcodTable) -> tuple[Rung, ...]:
    """The rungs of a downlink radio, in falling order of net rate, pilots counted."""
    return tuple(
        Rung(
            row.name,
            net_rate_mbps(radio.symbol_rate_msps, row.efficiency_bit_per_symbol)
            * (pilot_factor(row.name) if radio.pilots else 1.0),
            row.required_esn0_db,
        )
        for row in usable_modcods(radio, table)
    )


def _ionosphere_db(run: Run, frequency_mhz: float) -> float:
    """The policy's stated allowance for ionospheric scintillation and Faraday rotation, below 1 GHz only."""
    return run.policy.ionospheric_allowance_db if frequency_mhz < 1_000.0 else 0.0


def _downlink(run: Run, ground: Antenna, radio: DownlinkRadio, receiver: Receiver, mismatch_db: float) -> Chain:
    return Chain(
        radio=radio.name,
        partner=receiver.name,
        direction="downlink",
        frequency_mhz=radio.frequency_mhz,
        polarisation=radio.polarisation,
        eirp_dbw=radiated_dbw(radio),
        pointing_loss_aboard_db=radio.pointing_loss_db,
        pointing_loss_ground_db=receiver.pointing_loss_db,
        polarisation_loss_db=mismatch_db,
        g_over_t_db_per_k=reference_figure_db_per_k(receiver),
        rate_hz=radio.symbol_rate_msps * 1e6,
        implementation_loss_db=radio.implementation_loss_db,
        acquisition_s=radio.acquisition_s,
        rungs=rungs_of(radio, run.modcod_tables[radio.modcod_table]),
        ionospheric_loss_db=_ionosphere_db(run, radio.frequency_mhz),
        wet_radome_loss_db=ground.wet_radome_loss_db,
        pattern=radio.pattern,
        receiver=receiver,
        control=RateControl(radio.rate_control, radio.hysteresis_db, radio.min_dwell_s, radio.switching_gap_s),
    )


def _command(run: Run, ground: Antenna, radio: CommandRadio, transmitter: Transmitter, mismatch_db: float) -> Chain:
    return Chain(
        radio=radio.name,
        partner=transmitter.name,
        direction="command",
        frequency_mhz=radio.frequency_mhz,
        polarisation=radio.polarisation,
        eirp_dbw=radiated_dbw(transmitter),
        pointing_loss_aboard_db=radio.pointing_loss_db,
        pointing_loss_ground_db=transmitter.pointing_loss_db,
        polarisation_loss_db=mismatch_db,
        g_over_t_db_per_k=radio.g_over_t_db_per_k,
        rate_hz=radio.bit_rate_kbps * 1e3,
        implementation_loss_db=radio.implementation_loss_db,
        acquisition_s=radio.acquisition_s,
        rungs=(Rung("command", radio.bit_rate_kbps / 1e3, radio.required_ebn0_db),),
        ionospheric_loss_db=_ionosphere_db(run, radio.frequency_mhz),
        wet_radome_loss_db=ground.wet_radome_loss_db,
        pattern=radio.pattern,
    )
