"""Does any battery fall under its floor? Followed from event to event, with shadows found afresh."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from itertools import pairwise
from typing import Any

import numpy as np

from passplan.inputs.fleet import DownlinkRadio, Spacecraft
from passplan.inputs.run import Run
from passplan.planning.audit.craft_limits import on_air_s
from passplan.planning.audit.faults import Fault, differs
from passplan.planning.audit.rows import Contact
from passplan.planning.audit.sky import fixed_km
from passplan.planning.audit.sun import toward_sun

Spans = Sequence[tuple[float, float, float]]
"""(from s, to s, W) each."""

_STEP_S = 20.0
_EARTH_KM = 6_378.137
# What the plan's and the audit's edges of the shadow may differ by.
_EDGE_S = 0.5


def check_batteries(run: Run, contacts: Sequence[Contact], summary: Mapping[str, Any]) -> Iterator[Fault]:
    """Every battery against its floor, and against the lowest charge that the plan states."""
    stated = summary.get("battery", {})
    for name in run.orbits:
        craft = run.spacecraft[name]
        if craft.battery_wh is None:
            continue
        place = f"spacecraft {name}"
        shadows = _shadows(run, name)
        slack_wh = ((craft.solar_w or 0.0) * _EDGE_S * 2 * len(shadows)) / 3600.0 + 1e-6 * craft.battery_wh
        loads = [(*on_air_s(run, c), _load_w(run, c)) for c in contacts if c.spacecraft == name and c.pieces]
        events = sorted({0.0, float(run.horizon_s), *(t for a, b, _ in [*loads, *shadows] for t in (a, b))})
        idle_wh, charge_wh = (_follow(craft, events, shadows, drawn) for drawn in ([], loads))
        floor_wh = craft.battery_wh * craft.battery_floor_percent / 100.0
        # What the base load does alone is no contact's fault; making it worse is.
        deepest_wh, at_s = max((min(floor_wh, i) - c, t) for i, c, t in zip(idle_wh, charge_wh, events, strict=True))
        if deepest_wh > slack_wh:
            sentence = f"its battery falls {deepest_wh:.3f} Wh under the floor of {floor_wh:g} Wh"
            yield Fault("battery", place, f"{sentence}, {at_s:.0f} s after the start of the horizon")
        entry = stated.get(name, {}) if isinstance(stated, Mapping) else {}
        lowest_wh = max(0.0, min(charge_wh))
        if differs(float(entry.get("lowest_wh", np.nan)), lowest_wh, slack_wh):
            sentence = f"its lowest charge is {lowest_wh:.3f} Wh, the summary says {entry.get('lowest_wh')}"
            yield Fault("battery", place, sentence)


def _follow(craft: Spacecraft, events: Sequence[float], shadows: Spans, loads: Spans) -> list[float]:
    """The charge [Wh] at each event; it stops at full."""
    full_wh = craft.battery_wh or 0.0
    held_wh = [full_wh * craft.battery_start_percent / 100.0]
    for low_s, high_s in pairwise(events):
        middle_s = (low_s + high_s) / 2.0
        dark = any(a <= middle_s < b for a, b, _ in shadows)
        power_w = (0.0 if dark else craft.solar_w or 0.0) - (craft.base_load_w or 0.0)
        power_w -= sum(load_w for a, b, load_w in loads if a <= middle_s < b)
        held_wh.append(min(full_wh, held_wh[-1] + power_w * (high_s - low_s) / 3600.0))
    return held_wh


def _load_w(run: Run, contact: Contact) -> float:
    radio = run.radios[contact.radio]
    return radio.load_w if isinstance(radio, DownlinkRadio) else 0.0


def _shadows(run: Run, name: str) -> list[tuple[float, float, float]]:
    """When the Earth hides the Sun's centre: behind the plane of the limb, and within a cylinder's edge of it.

    The Sun is so far that its light is parallel: a place is dark where it lies behind the Earth's centre and
    within the Earth's radius of the line through it. (Textbook geometry.)
    """
    times = np.append(np.arange(0.0, run.horizon_s, _STEP_S), float(run.horizon_s))
    position_km = fixed_km(run.orbits[name], run.start_utc, times)
    sun = toward_sun(run.start_utc, times)
    along_km = np.einsum("in,in->n", position_km, sun)
    aside_km = np.linalg.norm(position_km - along_km * sun, axis=0)
    # Positive in the light; smooth where it changes sign, as it does behind the Earth only.
    lit_km = np.where(along_km < 0.0, aside_km - _EARTH_KM, np.maximum(aside_km - _EARTH_KM, 1.0))
    edges = [0.0]
    for k in np.flatnonzero((lit_km[:-1] < 0.0) != (lit_km[1:] < 0.0)):
        edges.append(float(times[k] + (times[k + 1] - times[k]) * lit_km[k] / (lit_km[k] - lit_km[k + 1])))
    edges.append(float(run.horizon_s))
    middles = [(a + b) / 2.0 for a, b in pairwise(edges)]
    dark = np.interp(middles, times, lit_km) < 0.0
    return [(a, b, 0.0) for (a, b), shaded in zip(pairwise(edges), dark, strict=True) if shaded]
