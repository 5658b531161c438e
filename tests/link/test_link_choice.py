from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from link_bench import COMMAND_RADIO, X_RADIO, network, passes, with_radio

from passplan.inputs.modcods import builtin_table
from passplan.link.choice import DownlinkProfile
from passplan.link.profiles import link_profiles

PASS = (1_000.25, 620.5, 520.0, 4.0)
WEAK = X_RADIO.model_copy(update={"eirp_dbw": 2.0})


def _downlink(*radios: object, shape: tuple[float, float, float, float] = PASS, **policy: float) -> DownlinkProfile:
    run = network(radios=radios or (WEAK,), **policy)  # type: ignore[arg-type]
    link = link_profiles(run, *passes(shape))[0]
    assert link.downlink is not None
    return link.downlink


def _volume(profile: DownlinkProfile, start_s: int, end_s: int) -> float:
    choice = profile.best(start_s, end_s)
    return 0.0 if choice is None else choice.volume_mb


def test_sending_starts_after_acquisition_and_is_rounded_inward() -> None:
    # So strong that every modcod holds from AOS (1 000.25 s) to LOS (1 620.75 s).
    strong = X_RADIO.model_copy(update={"eirp_dbw": 60.0})
    choice = _downlink(strong).best(900, 2_000)
    assert choice is not None
    assert choice.modcod == "32APSK 9/10"
    assert (choice.send_start_s, choice.send_end_s) == (1_021, 1_620)
    assert choice.usable_s == 599
    # 50 Msymbol/s at 4.453027 bit per symbol (ETSI EN 302 307-1, Table 13), 8 bit to the byte.
    assert choice.rate_mbps == pytest.approx(222.65135)
    assert choice.volume_mb == pytest.approx(222.65135 * 599 / 8.0)
    inner = _downlink(strong).best(1_100, 1_300)
    assert inner is not None
    assert (inner.send_start_s, inner.send_end_s) == (1_120, 1_300)


def test_too_short_for_anything() -> None:
    profile = _downlink()
    assert profile.best(1_100, 1_120) is None
    assert profile.best(1_100, 1_100) is None
    assert profile.best(100, 200) is None


def test_least_margin_is_that_of_the_sending() -> None:
    profile = _downlink()
    choice = profile.best(1_000, 1_621)
    assert choice is not None
    track = profile.tracks[0]
    required = next(r.required_db for r in track.chain.rungs if r.name == choice.modcod)
    seconds = np.arange(choice.send_start_s, choice.send_end_s + 1)
    least = np.interp(seconds, track.time_s, track.quality_db).min() - required
    assert choice.min_margin_db == pytest.approx(least, abs=1e-9)
    assert choice.min_margin_db >= 3.0 - 1e-9


@settings(deadline=None, max_examples=20)
@given(st.floats(-8.0, 20.0), st.integers(0, 600), st.integers(1, 700), st.floats(0.0, 60.0))
def test_no_modcod_brings_more_than_the_chosen_one(eirp: float, start: int, length: int, acquisition: float) -> None:
    run = with_radio(network(radios=(X_RADIO,)), eirp_dbw=eirp, acquisition_s=acquisition)
    link = link_profiles(run, *passes(PASS))[0]
    start_s, end_s = 1_000 + start, 1_000 + start + length
    most = 0.0 if link.downlink is None else _volume(link.downlink, start_s, end_s)
    for modcod in builtin_table("dvb-s2").rows:
        alone = link_profiles(with_radio(run, modcods=(modcod.name,)), *passes(PASS))[0]
        if alone.downlink is not None:
            assert _volume(alone.downlink, start_s, end_s) <= most + 1e-9


@settings(deadline=None, max_examples=60)
@given(st.integers(0, 600), st.integers(0, 600), st.integers(0, 60), st.integers(0, 60), st.floats(-5.0, 15.0))
def test_a_longer_contact_never_brings_less(start: int, length: int, sooner: int, later: int, eirp: float) -> None:
    run = with_radio(network(radios=(X_RADIO,)), eirp_dbw=eirp)
    link = link_profiles(run, *passes(PASS))[0]
    if link.downlink is not None:
        start_s, end_s = 1_000 + start, 1_000 + start + length
        longer = _volume(link.downlink, start_s - sooner, end_s + later)
        assert longer >= _volume(link.downlink, start_s, end_s)


@settings(deadline=None, max_examples=60)
@given(st.floats(-8.0, 20.0), st.floats(0.0, 10.0), st.integers(0, 500), st.integers(30, 700))
def test_more_eirp_never_lowers_volume(eirp: float, more_db: float, start: int, length: int) -> None:
    volumes = []
    for level in (eirp, eirp + more_db):
        link = link_profiles(with_radio(network(radios=(X_RADIO,)), eirp_dbw=level), *passes(PASS))[0]
        volumes.append(0.0 if link.downlink is None else _volume(link.downlink, 1_000 + start, 1_000 + start + length))
    assert volumes[1] >= volumes[0]


@settings(deadline=None, max_examples=60)
@given(st.floats(-8.0, 20.0), st.floats(0.0, 10.0), st.floats(0.0, 10.0), st.integers(0, 500), st.integers(30, 700))
def test_a_higher_required_margin_never_raises_volume(
    eirp: float, margin: float, more: float, start: int, length: int
) -> None:
    volumes = []
    for required in (margin, margin + more):
        run = with_radio(network(radios=(X_RADIO,), required_margin_db=required), eirp_dbw=eirp)
        link = link_profiles(run, *passes(PASS))[0]
        volumes.append(0.0 if link.downlink is None else _volume(link.downlink, 1_000 + start, 1_000 + start + length))
    assert volumes[1] <= volumes[0]


def test_of_two_radios_the_one_that_brings_more_is_used() -> None:
    slow = WEAK.model_copy(update={"name": "slow", "symbol_rate_msps": 1.0})
    choice = _downlink(slow, WEAK).best(1_000, 1_621)
    assert choice is not None
    assert (choice.radio, choice.receiver) == ("x", "rx")


def test_of_equal_volumes_the_surer_one_is_used() -> None:
    # Twins but for their EIRP, so strong that both bring down the same at the top of the table.
    loud = X_RADIO.model_copy(update={"name": "loud", "eirp_dbw": 50.0})
    louder = X_RADIO.model_copy(update={"name": "louder", "eirp_dbw": 55.0})
    choice = _downlink(loud, louder).best(1_000, 1_621)
    assert choice is not None
    assert choice.radio == "louder"


def test_command_time_and_margin() -> None:
    link = link_profiles(network(radios=(COMMAND_RADIO,)), *passes(PASS))[0]
    assert link.downlink is None
    assert link.command is not None
    choice = link.command.best(1_000, 1_700)
    assert choice is not None
    assert (choice.radio, choice.transmitter) == ("up", "tx")
    assert (choice.send_start_s, choice.send_end_s) == (math.ceil(1_000.25 + 10.0), 1_620)
    assert choice.usable_s == 1_620 - 1_011
    assert choice.min_margin_db > 3.0
    assert link.command.best(1_610, 1_621) is None
