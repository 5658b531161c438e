"""When a contact's transmitter is on: from its acquisition on, to the end of sending."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from passplan.inputs.fleet import DownlinkRadio
from passplan.inputs.run import Run
from passplan.link.choice import DownlinkChoice
from passplan.planning.arrays import Floats, Integers
from passplan.planning.hooks import Draft


@dataclass(frozen=True, eq=False)
class OnAir:
    """For each option, shape (m,), whole seconds in which its transmitter is on; none where ``end_s`` is ``start_s``.

    ``load_w`` is what the transmitter draws meanwhile.
    """

    start_s: Integers
    end_s: Integers
    load_w: Floats


def on_air_span(run: Run, start_s: int, downlink: DownlinkChoice | None) -> tuple[int, int]:
    """The transmitter's seconds in a contact from ``start_s`` on that sends as ``downlink`` says.

    It is on for the radio's acquisition time before the first bit (not before the contact), and throughout
    pauses between pieces of sending.
    """
    if downlink is None:
        return start_s, start_s
    acquisition_s = math.ceil(run.radios[downlink.radio].acquisition_s)
    return max(start_s, downlink.send_start_s - acquisition_s), downlink.send_end_s


def on_air_needs(draft: Draft) -> Iterator[OnAir]:
    """One record for all options, where some limit of a spacecraft needs it."""
    crafts = [draft.run.spacecraft[name] for name in draft.problem.fleet.names]
    if not any(craft.counts_sending or craft.battery_wh is not None for craft in crafts):
        return
    spans = [on_air_span(draft.run, c.start_s, c.downlink) for c in draft.candidates]
    loads = [_load_w(draft.run, c.downlink) for c in draft.candidates]
    edges = np.array(spans, dtype=np.int64).reshape(-1, 2)
    yield OnAir(edges[:, 0], edges[:, 1], np.array(loads, dtype=float))


def _load_w(run: Run, downlink: DownlinkChoice | None) -> float:
    radio = None if downlink is None else run.radios[downlink.radio]
    return radio.load_w if isinstance(radio, DownlinkRadio) else 0.0
