"""Which chain of an antenna serves which radio of a spacecraft, and everything of it that does not move."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
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

    ``merit_db`` is Es/N0 (command: Eb/N0) after implementation loss, had the path no loss at all; take
    free-space loss and gas attenuation off to get the quality on a path. ``rungs`` are in falling order
    of rate, and each needs less than the one before it.
    """

    radio: str
    partner: str
    direction: Literal["downlink", "command"]
    frequency_mhz: float
    polarisation: str
    merit_db: float
    acquisition_s: float
    rungs: tuple[Rung, ...]


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
    loss_db = radio.pointing_loss_db + receiver.pointing_loss_db + mismatch_db + radio.implementation_loss_db
    cn0 = cn0_dbhz(radio.eirp_dbw, loss_db, receiver_figure_db_per_k(receiver))
    rungs = tuple(
        Rung(
            modcod.name,
            net_rate_mbps(radio.symbol_rate_msps, modcod.efficiency_bit_per_symbol),
            modcod.required_esn0_db,
        )
        for modcod in usable_modcods(radio, table)
    )
    return Chain(
        radio.name, receiver.name, "downlink", radio.frequency_mhz, radio.polarisation,
        float(density_ratio_db(cn0, radio.symbol_rate_msps * 1e6)), radio.acquisition_s, rungs,
    )


def _command(radio: CommandRadio, transmitter: Transmitter, mismatch_db: float) -> Chain:
    loss_db = radio.pointing_loss_db + transmitter.pointing_loss_db + mismatch_db + radio.implementation_loss_db
    cn0 = cn0_dbhz(transmitter.eirp_dbw, loss_db, radio.g_over_t_db_per_k)
    rung = Rung("command", radio.bit_rate_kbps / 1e3, radio.required_ebn0_db)
    return Chain(
        radio.name, transmitter.name, "command", radio.frequency_mhz, radio.polarisation,
        float(density_ratio_db(cn0, radio.bit_rate_kbps * 1e3)), radio.acquisition_s, (rung,),
    )
