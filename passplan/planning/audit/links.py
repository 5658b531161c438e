"""Can the contact carry what it claims: modcod, rate, margin, usable time and commands, computed anew."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

from passplan.inputs.fleet import CommandRadio, DownlinkRadio
from passplan.inputs.modcods import Modcod
from passplan.inputs.modcods_dvb_s2 import pilot_factor
from passplan.inputs.run import Run
from passplan.planning.audit.expectation import expectation_bounds
from passplan.planning.audit.faults import Fault, differs
from passplan.planning.audit.mechanics import has_losses
from passplan.planning.audit.quality import Quality, command_quality, downlink_quality
from passplan.planning.audit.rows import Contact, Piece
from passplan.planning.audit.sky import Sight
from passplan.planning.audit.standby import check_standby_downlink
from passplan.planning.audit.steps import check_steps

# The plan joins samples 10 s apart by straight lines; at 500 km that is low by up to 0.03 dB overhead and
# by far less near the horizon, where margins decide.
_TOLERANCE_DB = 0.1
_TOLERANCE_S = 2.0
_RELATIVE = 1e-9
_SCALE = 1e-3


def check_links(run: Run, contact: Contact, seen: Sight) -> Iterator[Fault]:
    """Faults of the radio, of the downlink where the contact offers one, and of the command link."""
    radio = run.radios.get(contact.radio)
    if radio is None or contact.radio not in run.spacecraft[contact.spacecraft].radios:
        yield Fault("radio", contact.place, f"{contact.spacecraft} carries no radio {contact.radio!r}")
        return
    if contact.polarisation != radio.polarisation or differs(contact.frequency_mhz, radio.frequency_mhz, 1e-6):
        yield Fault("radio", contact.place, f"frequency or polarisation is not that of radio {radio.name}")
    if contact.service != "command":
        if contact.standby:
            yield from check_standby_downlink(run, contact, seen)
        elif isinstance(radio, DownlinkRadio):
            yield from _check_downlink(run, contact, radio, seen)
        else:
            yield Fault("radio", contact.place, f"radio {radio.name} cannot send, yet the service is {contact.service}")
    elif contact.pieces or differs(contact.volume_mb, 0.0, 0.0):
        yield Fault("volume", contact.place, "a command contact brings down no data, yet it claims some")
    if contact.service != "downlink":
        yield from _check_command(run, contact, seen)


def _check_downlink(run: Run, contact: Contact, radio: DownlinkRadio, seen: Sight) -> Iterator[Fault]:
    quality = downlink_quality(run, contact, radio, seen)
    if quality is None:
        yield Fault("radio", contact.place, f"no receiver of {contact.antenna} can hear radio {radio.name}")
        return
    if not contact.pieces:
        yield Fault("usable", contact.place, "it is a downlink contact, yet it has no segment in which it sends")
        return
    allowed = {
        row.name: row
        for row in run.modcod_tables[radio.modcod_table].rows
        if not radio.modcods or row.name in radio.modcods
    }
    adaptive = radio.rate_control == "adaptive"
    rows: list[Modcod] = []
    for piece in contact.pieces:
        row = allowed.get(piece.modcod)
        if row is None or (piece.modcod != contact.modcod and not adaptive):
            yield Fault("modcod", contact.place, f"modcod {piece.modcod!r} is not one it may use here")
            return
        rows.append(row)
    names = {row.name for row in rows}
    if contact.modcod != (rows[0].name if len(names) == 1 else "stepped"):
        yield Fault("modcod", contact.place, f"it claims modcod {contact.modcod!r}, its segments use {len(names)}")
        return
    rates_mbps = {row.name: net_rate_mbps(radio, row) for row in allowed.values()}
    scale = 1.0
    if run.policy.volume_basis == "expected":
        scale = contact.pieces[0].rate_mbps / rates_mbps[rows[0].name]
        least, greatest = expectation_bounds(run, contact, radio, rates_mbps, allowed, seen)
        if not least - _SCALE <= scale <= greatest + _SCALE:
            sentence = f"its rates are {scale:.4f} times those of its modcods; over the year the link gives"
            yield Fault("expectation", contact.place, f"{sentence} {least:.4f} to {greatest:.4f} times as much")
            return
    robust = min(allowed.values(), key=lambda row: row.required_esn0_db)
    for piece, row in zip(contact.pieces, rows, strict=True):
        rate_mbps = rates_mbps[row.name] * scale
        yield from _check_piece(run, contact, radio, piece, (row, robust if adaptive else row), rate_mbps, quality)
    yield from _check_usable(run, contact, radio, rows, robust, quality)
    if adaptive:
        yield from check_steps(run, contact, radio, allowed, quality)
    elif radio.rate_control == "per-contact" and not has_losses(run, run.antennas[contact.antenna], "downlink"):
        yield from _check_choice(run, contact, radio, allowed, quality)


def net_rate_mbps(radio: DownlinkRadio, row: Modcod) -> float:
    """Net user data rate of a modcod on a radio, pilots counted."""
    rate_mbps = radio.symbol_rate_msps * row.efficiency_bit_per_symbol
    return rate_mbps * pilot_factor(row.name) if radio.pilots else rate_mbps


def _check_piece(
    run: Run, contact: Contact, radio: DownlinkRadio, piece: Piece, rows: tuple[Modcod, Modcod], rate_mbps: float,
    quality: Quality,
) -> Iterator[Fault]:
    """``rows`` are the modcod that is sent, at a rate, and the one on which the signal is acquired."""
    row, first = rows
    if differs(piece.rate_mbps, rate_mbps, _RELATIVE * rate_mbps):
        sentence = f"modcod {row.name} gives {rate_mbps:.6g} Mbit/s, not {piece.rate_mbps:.6g}"
        yield Fault("modcod", contact.place, sentence)
    most_mb = rate_mbps * (piece.end_s - piece.start_s) / 8.0
    if not -1e-6 <= piece.volume_mb <= most_mb * (1.0 + _RELATIVE) + 1e-6:
        sentence = f"{piece.volume_mb:.6f} MB cannot go down in {piece.end_s - piece.start_s:g} s of {row.name}"
        yield Fault("volume", contact.place, f"{sentence}, {most_mb:.6f} MB at most")
    if piece.start_s < contact.start_s + radio.acquisition_s - 1e-3:
        yield Fault("usable", contact.place, f"it sends before the {radio.acquisition_s:g} s of acquisition are over")
    acquired_s = max(contact.start_s, piece.start_s - radio.acquisition_s)
    margin_db = quality.least_db(piece.start_s, piece.end_s) - row.required_esn0_db
    before_db = quality.least_db(acquired_s, piece.start_s) - first.required_esn0_db
    if not min(margin_db, before_db) >= _asked(run) - _TOLERANCE_DB:
        sentence = f"modcod {row.name} has a margin of {margin_db:.2f} dB while sending"
        yield Fault("margin", contact.place, f"{sentence} and acquiring, {_asked(run):g} dB are required")


def _check_usable(
    run: Run, contact: Contact, radio: DownlinkRadio, rows: Sequence[Modcod], robust: Modcod, quality: Quality
) -> Iterator[Fault]:
    sending_s = math.fsum(piece.end_s - piece.start_s for piece in contact.pieces)
    if differs(contact.usable_s, sending_s, 1e-3):
        sentence = f"usable time {contact.usable_s:g} s does not agree with {sending_s:g} s of segments"
        yield Fault("usable", contact.place, sentence)
    # A stepped contact sends as long as its most robust modcod holds, but for the gaps.
    row = rows[0] if radio.rate_control != "adaptive" else robust
    gaps_s = radio.switching_gap_s * (len(rows) - 1) if radio.rate_control == "adaptive" else 0
    held_s = quality.longest_s(row.required_esn0_db + _asked(run) + _TOLERANCE_DB, low=True)
    possible_s = held_s - radio.acquisition_s - gaps_s
    # Where seconds are lost inside, less than all of it may be used.
    lossy = has_losses(run, run.antennas[contact.antenna], "downlink")
    if contact.usable_s < possible_s - _TOLERANCE_S and not lossy:
        sentence = f"usable time is {contact.usable_s:g} s, yet {row.name} holds for {possible_s:.0f} s"
        yield Fault("usable", contact.place, sentence)
    volume_mb = math.fsum(piece.volume_mb for piece in contact.pieces)
    if differs(contact.volume_mb, volume_mb, _RELATIVE * abs(volume_mb) + 1e-6):
        sentence = f"volume {contact.volume_mb:.6f} MB does not agree with {volume_mb:.6f} MB of segments"
        yield Fault("volume", contact.place, sentence)
    pieces = list(zip(contact.pieces, rows, strict=True))
    best_db, worst_db = (
        min(quality.least_db(p.start_s, p.end_s, low=low) - row.required_esn0_db for p, row in pieces)
        for low in (False, True)
    )
    if not worst_db - _TOLERANCE_DB <= contact.min_margin_db <= best_db + _TOLERANCE_DB:
        sentence = f"least margin is {best_db:.2f} dB, not {contact.min_margin_db:.2f} dB"
        yield Fault("margin", contact.place, sentence)


def _check_choice(
    run: Run, contact: Contact, radio: DownlinkRadio, allowed: dict[str, Modcod], quality: Quality
) -> Iterator[Fault]:
    """The modcod is the one that brings down most, to within the tolerances."""
    chosen = net_rate_mbps(radio, allowed[contact.modcod]) * (contact.usable_s + _TOLERANCE_S)
    for row in allowed.values():
        level_db = row.required_esn0_db + _asked(run) + _TOLERANCE_DB
        held_s = quality.longest_s(level_db, low=True) - radio.acquisition_s
        if net_rate_mbps(radio, row) * (held_s - _TOLERANCE_S) > chosen:
            more_mb = net_rate_mbps(radio, row) * held_s / 8.0
            sentence = f"modcod {row.name} could bring down {more_mb:.1f} MB, more than {contact.modcod}"
            yield Fault("modcod", contact.place, sentence)
            return


def _check_command(run: Run, contact: Contact, seen: Sight) -> Iterator[Fault]:
    """Some command radio aboard can be commanded for as long as the policy asks."""
    best: tuple[float, float, CommandRadio] | None = None
    for radio in (run.radios[name] for name in run.spacecraft[contact.spacecraft].radios):
        if isinstance(radio, CommandRadio):
            quality = command_quality(run, contact, radio, seen)
            if quality is not None:
                needed_db = radio.required_ebn0_db + _asked(run)
                usable_s = quality.longest_s(needed_db - _TOLERANCE_DB) - radio.acquisition_s
                if best is None or usable_s > best[0]:
                    least_s = quality.longest_s(needed_db + _TOLERANCE_DB, low=True) - radio.acquisition_s
                    best = usable_s, least_s, radio
    if best is None:
        sentence = f"{contact.antenna} cannot transmit to {contact.spacecraft}, yet the service is {contact.service}"
        yield Fault("command", contact.place, sentence)
        return
    most_s, least_s, radio = best
    if has_losses(run, run.antennas[contact.antenna], "command"):
        least_s = 0.0
    if most_s + _TOLERANCE_S < run.policy.command_min_s:
        sentence = f"commands have their margin for {max(most_s, 0.0):.0f} s"
        yield Fault("command", contact.place, f"{sentence}, {run.policy.command_min_s:g} s are required")
    elif contact.service == "command" and not (
        contact.radio == radio.name and least_s - _TOLERANCE_S <= contact.usable_s <= most_s + _TOLERANCE_S
    ):
        sentence = f"usable time is {contact.usable_s:g} s on radio {contact.radio}"
        yield Fault("usable", contact.place, f"{sentence}; commands hold for {most_s:.0f} s on radio {radio.name}")


def _asked(run: Run) -> float:
    return run.policy.required_margin_db
