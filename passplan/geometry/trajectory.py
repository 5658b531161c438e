"""One door to the states of any orbit source, and to its samples on even grids for the search."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from passplan.geometry.oem_states import ephemeris_itrf, ephemeris_regime, segment_itrf, segment_span
from passplan.geometry.regimes import ALWAYS_S, Regime, regime_of
from passplan.geometry.sgp4_states import sgp4_itrf, sgp4_span, sgp4_teme_many
from passplan.geometry.timescale import Floats, sidereal_angle_rad, utc_seconds
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.ephemeris import Ephemeris
from passplan.inputs.run import OrbitSource

# Samples (antennas x objects x times) per block: so many that a block's fixed cost of a few ms does not tell, so
# few that its work arrays take some 50 MB.
_BLOCK_SAMPLES = 1_000_000
# Sources with edges (decay, ephemeris spans) are sampled this much finer, so that stencils may lean to one side.
_EDGE_FINENESS = 10.0
_EDGE_POINTS = 25


@dataclass(frozen=True)
class Block:
    """Earth-fixed positions (3, objects, times) in km on the even grid ``start_s + k step_s``.

    ``objects`` are indices into the list of spacecraft. Nothing is known of an object outside its grid.
    """

    objects: NDArray[np.int64]
    start_s: float
    step_s: float
    positions_km: Floats


def states_itrf(source: OrbitSource, utc_s: Floats) -> tuple[Floats, Floats]:
    """Earth-fixed position (n, 3) in km and velocity (n, 3) in km/s of any source at ``utc_s`` (n,).

    NaN where SGP4 fails and outside an ephemeris' usable span.
    """
    if isinstance(source, Ephemeris):
        return ephemeris_itrf(source, np.asarray(utc_s, float))
    return sgp4_itrf(source.satrec, np.asarray(utc_s, float))


def blocks(orbits: Mapping[str, OrbitSource], start_s: float, end_s: float, antennas: int) -> Iterator[Block]:
    """All objects on grids that cover the horizon and its reach; whatever fails or ends early apart."""
    groups: dict[tuple[float, bool], list[tuple[int, ElementSet, float]]] = {}
    for index, source in enumerate(orbits.values()):
        if isinstance(source, Ephemeris):
            yield from _ephemeris_blocks(index, source, start_s, end_s)
        else:
            kind = regime_of(source.satrec)
            groups.setdefault((kind.step_s, kind.reach_s > ALWAYS_S), []).append((index, source, kind.reach_s))
    for (step_s, _), group in groups.items():
        reach_s = max(reach for _, _, reach in group)
        yield from _element_blocks(Regime(step_s, reach_s), [entry[:2] for entry in group], start_s, end_s, antennas)


def _element_blocks(
    kind: Regime, members: Sequence[tuple[int, ElementSet]], start_s: float, end_s: float, antennas: int
) -> Iterator[Block]:
    step = kind.step_s
    # Multiples of the step, so that a shifted horizon sees the same samples and gives the same instants.
    times = step * np.arange(np.floor((start_s - kind.reach_s) / step), np.ceil((end_s + kind.reach_s) / step) + 1)
    angle = sidereal_angle_rad(times)
    cosine, sine = np.cos(angle), np.sin(angle)
    share = max(1, _BLOCK_SAMPLES // (times.size * max(antennas, 1)))
    for at in range(0, len(members), share):
        part = members[at : at + share]
        teme, failed = sgp4_teme_many([source.satrec for _, source in part], times)
        whole = np.asarray(~failed.any(axis=1))
        fixed = _turned(teme if whole.all() else teme[whole], cosine, sine)
        if fixed.shape[1]:
            yield Block(np.array([i for (i, _), good in zip(part, whole, strict=True) if good]), times[0], step, fixed)
        for (index, source), good in zip(part, whole, strict=True):
            if not good:
                yield from _failing_block(index, source, times[0], times[-1])


def _failing_block(index: int, source: ElementSet, start_s: float, end_s: float) -> Iterator[Block]:
    """The part of an object's life that SGP4 reaches, on a fine grid that ends at the failure itself."""
    epoch_s = float(utc_seconds(source.epoch_utc))
    low, high = sgp4_span(source.satrec, epoch_s, start_s, end_s)
    if high - low >= 1.0:
        grid, step = _edge_grid(low, high, regime_of(source.satrec))
        yield Block(np.array([index]), low, step, _components(sgp4_itrf(source.satrec, grid)[0]))


def _ephemeris_blocks(index: int, source: Ephemeris, start_s: float, end_s: float) -> Iterator[Block]:
    kind = ephemeris_regime(source)
    for segment in source.segments:
        first, last = segment_span(segment)
        low, high = max(first, start_s - kind.reach_s), min(last, end_s + kind.reach_s)
        if high - low >= 1.0:
            grid, step = _edge_grid(low, high, kind)
            yield Block(np.array([index]), low, step, _components(segment_itrf(segment, grid)[0]))


def _turned(teme_km: Floats, cosine: Floats, sine: Floats) -> Floats:
    """Earth-fixed components (3, objects, times) of TEME positions (objects, times, 3), for one angle per time."""
    x, y, z = (teme_km[:, :, axis] for axis in range(3))
    fixed = np.empty((3, *teme_km.shape[:2]))
    np.add(cosine * x, sine * y, out=fixed[0])
    np.subtract(cosine * y, sine * x, out=fixed[1])
    fixed[2] = z
    return fixed


def _components(positions_km: Floats) -> Floats:
    """One object's positions (times, 3) in the layout of a block."""
    return np.ascontiguousarray(positions_km.T)[:, None, :]


def _edge_grid(low: float, high: float, kind: Regime) -> tuple[Floats, float]:
    """Times from ``low`` to ``high``, both among them, and their step."""
    count = max(_EDGE_POINTS, int(np.ceil((high - low) * _EDGE_FINENESS / kind.step_s)) + 1)
    return np.linspace(low, high, count), (high - low) / (count - 1)
