"""Which chain of an antenna serves which radio of a spacecraft, and everything of it that does not move."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import cached_property
from typing import Literal

from passplan.inputs.fleet import CommandRadio, DownlinkRadio
from passplan.inputs.ground import Receiver, Transmitter
from passplan.inputs.matching import matching_loss_db
from passplan.inputs.modcods import Modcod, ModcodTable
from passplan.inputs.run import Run
from passplan.link.budget import cn0_dbhz, density_ratio_db, figure_of_merit_db_per_k, net_rate_mbps


@dataclass(frozen=True)
class Rung:
    """One way to send: its name, its net rate [Mbit/s], and the Es/N0 (command: Eb/N0) it needs [dB]."""

    name: str
    rate_mbps: float
    required_db: float


@dataclass(frozen=True)
class Chain:
    """A radio aboard with the receiver (command: transmitter) on the ground that serves it best.

    Everything of a budget that does not move: losses are positive; ``rate_hz`` is the symbol rate
    (command: the bit rate). ``rungs`` are in falling order of rate, each needing less than the one before.
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

    @cached_property
    def merit_db(self) -> float:
        """Es/N0 (command: Eb/N0) after implementation loss, had the path no loss at all [dB].

        Free-space loss and gas attenuation come off it to give the quality on a path.
        """
        loss_db = (
            self.pointing_loss_aboard_db + self.pointing_loss_ground_db + self.polarisation_loss_db
            + self.implementation_loss_db
        )
        return float(density_ratio_db(cn0_dbhz(self.eirp_dbw, loss_db, self.g_over_t_db_per_k), self.rate_hz))


def receiver_figure_db_per_k(receiver: Receiver) -> float:
    """G/T as stated, or from gain and noise temperature [dB/K]."""
    if receiver.g_over_t_db_per_k is not None:
        return receiver.g_over_t_db_per_k
    if receiver.gain_dbi is None or receiver.noise_temperature_k is None:
        raise ValueError(f"receiver {receiver.name!r} states neither G/T nor gain and noise temperature")
    return float(figure_of_merit_db_per_k(receiver.gain_dbi, receiver.noise_temperature_k))


def best_receiver(radio: DownlinkRadio, receivers: Iterable[Receiver]) -> tuple[Receiver, float] | None:
    """The receiver with the best G/T for ``radio`` after pointing and polarisation loss, and the latter.

    Ties go by name. None where no receiver covers the frequency and the polarisation.
    """
    fitting = [(item, loss) for item in receivers if (loss := matching_loss_db(radio, item)) is not None]
    return min(
        fitting,
        key=lambda pair: (pair[0].pointing_loss_db + pair[1] - receiver_figure_db_per_k(pair[0]), pair[0].name),
        default=None,
    )


def best_transmitter(radio: CommandRadio, transmitters: Iterable[Transmitter]) -> tuple[Transmitter, float] | None:
    """The transmitter with the best EIRP towards ``radio``, as :func:`best_receiver`."""
    fitting = [(item, loss) for item in transmitters if (loss := matching_loss_db(radio, item)) is not None]
    return min(
        fitting,
        key=lambda pair: (pair[0].pointing_loss_db + pair[1] - pair[0].eirp_dbw, pair[0].name),
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
                chains.append(_downlink(radio, *receiving, run.modcod_tables[radio.modcod_table]))
        else:
            sending = best_transmitter(radio, transmitters)
            if sending is not None:
                chains.append(_command(radio, *sending))
    return tuple(chains)


def _downlink(radio: DownlinkRadio, receiver: Receiver, mismatch_db: float, table: ModcodTable) -> Chain:
    rungs = tuple(
        Rung(row.name, net_rate_mbps(radio.symbol_rate_msps, row.efficiency_bit_per_symbol), row.required_esn0_db)
        for row in usable_modcods(radio, table)
    )
    return Chain(
        radio=radio.name,
        partner=receiver.name,
        direction="downlink",
        frequency_mhz=radio.frequency_mhz,
        polarisation=radio.polarisation,
        eirp_dbw=radio.eirp_dbw,
        pointing_loss_aboard_db=radio.pointing_loss_db,
        pointing_loss_ground_db=receiver.pointing_loss_db,
        polarisation_loss_db=mismatch_db,
        g_over_t_db_per_k=receiver_figure_db_per_k(receiver),
        rate_hz=radio.symbol_rate_msps * 1e6,
        implementation_loss_db=radio.implementation_loss_db,
        acquisition_s=radio.acquisition_s,
        rungs=rungs,
    )


def _command(radio: CommandRadio, transmitter: Transmitter, mismatch_db: float) -> Chain:
    return Chain(
        radio=radio.name,
        partner=transmitter.name,
        direction="command",
        frequency_mhz=radio.frequency_mhz,
        polarisation=radio.polarisation,
        eirp_dbw=transmitter.eirp_dbw,
        pointing_loss_aboard_db=radio.pointing_loss_db,
        pointing_loss_ground_db=transmitter.pointing_loss_db,
        polarisation_loss_db=mismatch_db,
        g_over_t_db_per_k=radio.g_over_t_db_per_k,
        rate_hz=radio.bit_rate_kbps * 1e3,
        implementation_loss_db=radio.implementation_loss_db,
        acquisition_s=radio.acquisition_s,
        rungs=(Rung("command", radio.bit_rate_kbps / 1e3, radio.required_ebn0_db),),
    )
