"""Revolutions of an orbit, counted from one ascending node to the next."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from passplan.geometry.frames import EARTH_RATE_RAD_S
from passplan.geometry.oem_states import segment_span
from passplan.geometry.regimes import MU_KM3_S2
from passplan.geometry.sgp4_states import sgp4_span
from passplan.geometry.timescale import Floats, datetimes_ms, utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.run import OrbitSource

_STEP_S = 60.0
_NEWTON_STEPS = 3


def ascending_nodes(
    source: OrbitSource, start_utc: np.datetime64, end_utc: np.datetime64
) -> NDArray[np.datetime64]:
    """Instants (n,) of ``datetime64[ms]`` within (start, end] at which it crosses the equator northward.

    They follow from the trajectory itself, so that an orbit is counted as it is flown. There are none where the
    orbit source has no answer, and none for an orbit that lies in the plane of the equator.
    """
    start_s, end_s = float(utc_seconds(start_utc)), float(utc_seconds(end_utc))
    low, high = _reach(source, start_s - _STEP_S, end_s + _STEP_S)
    nodes = _crossings(source, low, high) if high > low else np.zeros(0)
    return datetimes_ms(nodes[(nodes > start_s) & (nodes <= end_s)])


def revolution_edges_s(source: OrbitSource, start_utc: np.datetime64, end_utc: np.datetime64) -> Floats:
    """Seconds from ``start_utc`` at which the orbit crosses the equator northward, rising, from the last one before
    the start or at it to the first one after the end or at it.

    Where the source does not reach (outside an ephemeris, after a decay) revolutions go on at the length of the
    nearest one; an orbit that shows no node at all (its plane is the equator's) counts them from the start.
    A node is where the Earth-fixed z changes sign; polar motion is off on this floor. Newton's method on z with
    its velocity; z bends little there.
    """
    start_s, end_s = float(utc_seconds(start_utc)), float(utc_seconds(end_utc))
    period = _period_s(source, start_s, end_s)
    low, high = _reach(source, start_s - 1.5 * period, end_s + 1.5 * period)
    nodes = _crossings(source, low, high) if high > low else np.zeros(0)
    if len(nodes) == 0:
        nodes = np.array([start_s])
    first, last = (nodes[1] - nodes[0], nodes[-1] - nodes[-2]) if len(nodes) > 1 else (period, period)
    before = max(0, int(np.ceil((nodes[0] - start_s) / first)))
    after = max(0, int(np.ceil((end_s - nodes[-1]) / last)))
    whole = np.concatenate([
        nodes[0] - first * np.arange(before, 0, -1), _without_gaps(nodes, period),
        nodes[-1] + last * np.arange(1, after + 1)])
    kept = whole[max(0, np.searchsorted(whole, start_s, side="right") - 1):np.searchsorted(whole, end_s) + 1]
    return np.asarray(kept - start_s)


def _crossings(source: OrbitSource, low: float, high: float) -> Floats:
    # Multiples of the step, so that a shifted horizon finds the same instants.
    grid = np.concatenate([[low], _STEP_S * np.arange(np.ceil(low / _STEP_S), np.ceil(high / _STEP_S)), [high]])
    height = states_itrf(source, grid)[0][:, 2]
    at = np.flatnonzero((height[:-1] < 0.0) & (height[1:] >= 0.0))
    node = grid[at] - height[at] * (grid[at + 1] - grid[at]) / (height[at + 1] - height[at])
    for _ in range(_NEWTON_STEPS):
        position, velocity = states_itrf(source, node)
        node = np.clip(node - position[:, 2] / velocity[:, 2], grid[at], grid[at + 1])
    return np.asarray(node, float)


def _without_gaps(nodes: Floats, period: float) -> Floats:
    """Nodes with those that fall into a gap of an ephemeris, evenly between the seen ones."""
    parts = np.maximum(1, np.rint(np.diff(nodes) / period)).astype(int)
    inner = [a + (b - a) * np.arange(n) / n for a, b, n in zip(nodes[:-1], nodes[1:], parts, strict=True)]
    return np.concatenate([*inner, nodes[-1:]])


def _reach(source: OrbitSource, low: float, high: float) -> tuple[float, float]:
    """The part of the span in which the source has states; gaps inside an ephemeris show none."""
    if isinstance(source, ElementSet):
        return sgp4_span(source.satrec, float(utc_seconds(source.epoch_utc)), low, high)
    spans = [segment_span(segment) for segment in source.segments]
    return max(low, min(a for a, _ in spans)), min(high, max(b for _, b in spans))


def _period_s(source: OrbitSource, start_s: float, end_s: float) -> float:
    if isinstance(source, ElementSet):
        return float(2.0 * np.pi / source.satrec.no_kozai * 60.0)
    # Vis-viva: the semi-major axis from one state; the Earth's turn is added to the Earth-fixed velocity.
    low, high = _reach(source, start_s, end_s)
    position, velocity = (array[0] for array in states_itrf(source, np.array([min(max(low, start_s), high)])))
    inertial = velocity + np.cross([0.0, 0.0, EARTH_RATE_RAD_S], position)
    axis_km = 1.0 / (2.0 / np.linalg.norm(position) - float(inertial @ inertial) / MU_KM3_S2)
    return float(2.0 * np.pi * np.sqrt(axis_km**3 / MU_KM3_S2))
