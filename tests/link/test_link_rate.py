"""Rate control: fixed, per contact and adaptive; the invariants hold before hysteresis, dwell and gaps."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from link_bench import X_RADIO, network, passes, with_radio

from passplan.geometry.losses import Loss, Losses
from passplan.inputs.modcods import builtin_table
from passplan.inputs.run import Run
from passplan.link.chains import RateControl
from passplan.link.choice import DownlinkChoice
from passplan.link.profiles import link_profiles
from passplan.link.steps import rate_steps

FREE = {"hysteresis_db": 0.0, "min_dwell_s": 0, "switching_gap_s": 0}
PASS = (1_000.0, 600.0, 550.0, 3.0)
SHAPES = st.tuples(st.just(1_000.0), st.floats(200.0, 700.0), st.floats(450.0, 900.0), st.floats(0.5, 12.0))


def _volume(choice: DownlinkChoice | None) -> float:
    return 0.0 if choice is None else choice.volume_mb


def _best(
    run: Run, shape: tuple[float, float, float, float], begin: float = 0.0, end: float = 1.0
) -> DownlinkChoice | None:
    windows, samples = passes(shape)
    profile = link_profiles(run, windows, samples)[0].downlink
    first, last = samples.time_s[0], samples.time_s[-1]
    start_s, end_s = round(first + begin * (last - first)), round(first + end * (last - first))
    return None if profile is None else profile.best(start_s, end_s)


def _controlled(run: Run, kind: str, **rules: Any) -> Run:
    return with_radio(run, rate_control=kind, **{**FREE, **rules})


@settings(deadline=None, max_examples=30)
@given(SHAPES, st.floats(-12.0, 18.0), st.integers(0, 27), st.floats(0.0, 0.4), st.floats(0.6, 1.0))
def test_adaptive_never_below_per_contact_never_below_fixed(
    shape: tuple[float, float, float, float], eirp_dbw: float, index: int, begin: float, end: float
) -> None:
    run = with_radio(network(), eirp_dbw=eirp_dbw)
    name = builtin_table("dvb-s2").rows[index].name
    fixed = _volume(_best(_controlled(with_radio(run, modcods=(name,)), "fixed"), shape, begin, end))
    chosen = _volume(_best(_controlled(run, "per-contact"), shape, begin, end))
    stepped = _volume(_best(_controlled(run, "adaptive"), shape, begin, end))
    assert fixed <= chosen + 1e-6
    assert chosen <= stepped + 1e-6


@settings(deadline=None, max_examples=30)
@given(SHAPES, st.floats(-12.0, 18.0), st.floats(0.0, 6.0), st.sampled_from(["per-contact", "adaptive"]))
def test_more_eirp_never_lowers_volume(
    shape: tuple[float, float, float, float], eirp_dbw: float, more_db: float, kind: str
) -> None:
    run = _controlled(network(), kind)
    less, more = (_volume(_best(with_radio(run, eirp_dbw=e), shape)) for e in (eirp_dbw, eirp_dbw + more_db))
    assert less <= more + 1e-6


@settings(deadline=None, max_examples=12)
@given(SHAPES, st.sampled_from([0.0, 2.0, 10.0, 40.0]), st.sampled_from([0.0, 1.0, 30.0]),
       st.sampled_from(["per-contact", "adaptive"]))
def test_more_rain_never_raises_volume(
    shape: tuple[float, float, float, float], rate: float, more: float, kind: str
) -> None:
    run = _controlled(with_radio(network(), eirp_dbw=3.0), kind)
    volumes = []
    for rain in (rate, rate + more):
        sites = {name: site.model_copy(update={"rain_rate_mm_per_h": rain}) for name, site in run.sites.items()}
        volumes.append(_volume(_best(replace(run, sites=sites), shape)))
    assert volumes[0] >= volumes[1] - 1e-6


@settings(deadline=None, max_examples=30)
@given(SHAPES, st.floats(-5.0, 15.0), st.floats(0.0, 2.0), st.integers(0, 40), st.integers(0, 3))
def test_steps_keep_their_rules(
    shape: tuple[float, float, float, float], eirp_dbw: float, hysteresis_db: float, dwell_s: int, gap_s: int
) -> None:
    run = _controlled(
        with_radio(network(), eirp_dbw=eirp_dbw), "adaptive", hysteresis_db=hysteresis_db, min_dwell_s=dwell_s,
        switching_gap_s=gap_s,
    )
    windows, samples = passes(shape)
    profile = link_profiles(run, windows, samples)[0].downlink
    choice = None if profile is None else profile.best(int(samples.time_s[0]), int(samples.time_s[-1]))
    if profile is None or choice is None:
        return
    track = profile.tracks[0]
    needs = {rung.name: rung.required_db + 3.0 for rung in track.chain.rungs}
    assert choice.usable_s == sum(piece.end_s - piece.start_s for piece in choice.pieces)
    assert choice.volume_mb == pytest.approx(sum(p.rate_mbps * (p.end_s - p.start_s) for p in choice.pieces) / 8.0)
    for piece in choice.pieces:
        assert track.least_quality_db(piece.start_s, piece.end_s) >= needs[piece.modcod] - 1e-3
    for before, after in pairwise(choice.pieces):
        assert after.start_s - before.end_s == gap_s
        assert before.modcod != after.modcod
        if after.rate_mbps > before.rate_mbps:
            quality = float(np.interp(before.end_s, track.time_s, track.quality_db))
            assert quality >= needs[after.modcod] + hysteresis_db - 1e-6 or hysteresis_db == 0.0
    for piece in choice.pieces[1:-1]:
        assert piece.end_s - piece.start_s >= dwell_s


def test_a_contact_takes_its_part_of_the_window_s_steps() -> None:
    run = with_radio(_controlled(network(), "adaptive"), eirp_dbw=8.0)
    whole, half = _best(run, PASS), _best(run, PASS, 0.0, 0.5)
    assert whole is not None
    assert half is not None
    assert whole.modcod == half.modcod == "stepped"
    assert [p.modcod for p in whole.pieces][: len(half.pieces)] == [p.modcod for p in half.pieces]
    assert half.send_end_s == 1_300
    assert whole.rate_mbps == pytest.approx(8.0 * whole.volume_mb / whole.usable_s)


def test_one_modcod_all_along_is_not_called_stepped() -> None:
    choice = _best(_controlled(with_radio(network(), modcods=("QPSK 1/4",)), "adaptive"), PASS)
    assert choice is not None
    assert choice.modcod == "QPSK 1/4"


def test_steps_by_hand() -> None:
    # Rung 1 holds throughout, rung 0 from second 3 to 9; a dwell of 4 s and a gap of 1 s.
    holds = [1, 1, 1, 0, 0, 0, 0, 0, 0, 1, 1, 1]
    rules = RateControl("adaptive", 0.0, 4, 1)
    steps = rate_steps(100, holds, holds, rules, 99.5)
    assert [(s.start_s, s.end_s, s.rung) for s in steps] == [(100, 104, 1), (105, 109, 0), (110, 112, 1)]
    # Two seconds are too short for the dwell: no step is taken.
    short = [1, 1, 1, 1, 1, 0, 0, 1, 1, 1]
    assert [(s.start_s, s.end_s, s.rung) for s in rate_steps(0, short, short, rules, 0.0)] == [(0, 10, 1)]


def test_quality_is_continuous_along_a_pass_under_weather() -> None:
    """No step in C/N0: between samples 0.1 s apart the quality moves by hundredths of a dB."""
    run = network(unavailability_percent=0.1, radios=(X_RADIO,))
    windows, samples = passes((0.0, 700.0, 550.0, 0.2), step_s=0.1)
    profile = link_profiles(run, windows, samples)[0].downlink
    assert profile is not None
    # At 5 deg P.618 itself has a step, which the tables spread over 0.02 deg.
    assert np.abs(np.diff(profile.tracks[0].quality_db)).max() < 0.1


@settings(deadline=None, max_examples=30)
@given(
    SHAPES, st.lists(st.tuples(st.floats(0.0, 1.0), st.floats(0.5, 60.0)), max_size=3), st.sampled_from([0.0, 12.5]),
    st.sampled_from(["per-contact", "adaptive"]),
)
def test_nothing_is_sent_in_what_is_lost_nor_while_acquiring_after_it(
    shape: tuple[float, float, float, float], gaps: list[tuple[float, float]], acquisition_s: float, kind: str
) -> None:
    run = _controlled(with_radio(network(), acquisition_s=acquisition_s), kind, switching_gap_s=2, min_dwell_s=5)
    windows, samples = passes(shape)
    first, last = samples.time_s[0], samples.time_s[-1]
    rows = tuple(Loss(0, first + a * (last - first), first + a * (last - first) + w, "keyhole") for a, w in gaps)
    losses = Losses(rows)
    span = round(first), round(last)
    whole = link_profiles(run, windows, samples)[0].downlink
    cut = link_profiles(run, windows, samples, losses)[0].downlink
    assert whole is not None
    assert cut is not None
    before, after = whole.best(*span), cut.best(*span)
    assert _volume(after) <= _volume(before) + 1e-9
    if not rows:
        assert after == before
    if after is None:
        return
    for piece in after.pieces:
        for start_s, end_s in losses.of(0, "downlink"):
            assert piece.end_s <= start_s + 1e-6 or piece.start_s >= end_s + acquisition_s - 1e-6
    assert all(a.end_s <= b.start_s for a, b in pairwise(after.pieces))
    assert after.usable_s == sum(piece.end_s - piece.start_s for piece in after.pieces)
    carried_mb = sum((piece.end_s - piece.start_s) * piece.rate_mbps / 8.0 for piece in after.pieces)
    assert after.volume_mb == pytest.approx(carried_mb)
    assert (after.send_start_s, after.send_end_s) == (after.pieces[0].start_s, after.pieces[-1].end_s)
    if kind == "per-contact":
        assert {(piece.modcod, piece.rate_mbps) for piece in after.pieces} == {(after.modcod, after.rate_mbps)}
