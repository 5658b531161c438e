"""Does a contact that steps its rate keep the radio's rules: gaps, dwell, hysteresis, and no needless slowness?"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from itertools import pairwise

from passplan.inputs.fleet import DownlinkRadio
from passplan.inputs.modcods import Modcod
from passplan.inputs.run import Run
from passplan.planning.audit.faults import Fault
from passplan.planning.audit.quality import Quality
from passplan.planning.audit.rows import Contact, Piece

_TOLERANCE_DB = 0.1
_TOLERANCE_S = 2.0


def check_steps(
    run: Run, contact: Contact, radio: DownlinkRadio, allowed: Mapping[str, Modcod], quality: Quality
) -> Iterator[Fault]:
    """Faults of the steps between segments, and of a segment that a faster modcod could have carried."""
    pieces = contact.pieces
    for k, (before, after) in enumerate(pairwise(pieces)):
        old, new = allowed[before.modcod], allowed[after.modcod]
        pause_s = after.start_s - before.end_s
        # A longer pause than the gap is a loss of signal: what follows is a new beginning.
        if old.name == new.name or pause_s > radio.switching_gap_s + 1e-3:
            continue
        if pause_s < radio.switching_gap_s - 1e-3:
            yield Fault("steps", contact.place, f"{radio.switching_gap_s} s of gap are missing before {after.modcod}")
        # A short loss may part a step in two.
        first = k
        while first > 0 and pieces[first - 1].modcod == old.name and _joined(radio, pieces[first - 1], pieces[first]):
            first -= 1
        sent_s = before.end_s - pieces[first].start_s
        if first > 0 and sent_s < radio.min_dwell_s - 1e-3 and _joined(radio, pieces[first - 1], pieces[first]):
            sentence = f"{before.modcod} is left after {sent_s:g} s"
            yield Fault("steps", contact.place, f"{sentence}, the least dwell is {radio.min_dwell_s} s")
        if new.required_esn0_db > old.required_esn0_db:
            spare_db = quality.at_db(before.end_s) - new.required_esn0_db - run.policy.required_margin_db
            if spare_db < radio.hysteresis_db - _TOLERANCE_DB:
                sentence = f"it steps up to {after.modcod} with {spare_db:.2f} dB to spare"
                yield Fault("steps", contact.place, f"{sentence}, the hysteresis is {radio.hysteresis_db:g} dB")
    for piece in pieces:
        yield from _needlessly_slow(run, contact, radio, allowed, piece, quality)


def _joined(radio: DownlinkRadio, before: Piece, after: Piece) -> bool:
    return after.start_s - before.end_s <= radio.switching_gap_s + 1e-3


def _needlessly_slow(
    run: Run, contact: Contact, radio: DownlinkRadio, allowed: Mapping[str, Modcod], piece: Piece, quality: Quality
) -> Iterator[Fault]:
    """A step up is due once the dwell is over, if the faster modcod will hold for a dwell."""
    settled_s = piece.start_s + radio.min_dwell_s + radio.switching_gap_s + _TOLERANCE_S
    until_s = settled_s + radio.min_dwell_s + radio.switching_gap_s + _TOLERANCE_S
    if until_s > piece.end_s:
        return
    held_db = quality.least_db(settled_s, piece.end_s, low=True) - run.policy.required_margin_db
    spare_db = held_db - radio.hysteresis_db - _TOLERANCE_DB
    own = allowed[piece.modcod]
    for row in allowed.values():
        faster = row.efficiency_bit_per_symbol > own.efficiency_bit_per_symbol
        if faster and row.required_esn0_db <= spare_db:
            from_s = settled_s - contact.start_s
            sentence = f"it stays on {own.name} where {row.name} would hold, from {from_s:.0f} s on"
            yield Fault("steps", contact.place, sentence)
            return
