"""Who must not send at once, against a search without any cunning: every pair, every fifth of a second."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from sisters import orbit, sisters, windows_of

from passplan.geometry.pointing import look_angles
from passplan.geometry.sun import pointing_vectors
from passplan.inputs.run import Run
from passplan.link.chains import chains_between
from passplan.link.conflicts import Interference, find_interference
from passplan.link.interference import c_over_i_db
from passplan.link.interference_scan import NEGLECTED

REQUIRED_DB = 15.0
# A train with gaps of 0.4 to 4 deg of arc, one that crosses its path, and one far ahead.
ORBITS = {
    "Lapwing": orbit(70.0), "Dunlin": orbit(69.6), "Knot": orbit(72.0), "Godwit": orbit(70.9), "Ruff": orbit(66.0),
    "Snipe": orbit(70.3, 86.0), "Stint": orbit(200.0),
}
STEPS = 5


def _brute_shares(run: Run, window: pd.Series) -> tuple[np.ndarray, list[str], np.ndarray]:
    """Whole seconds of a window, the others, and their power over what is tolerated at each fifth of a second."""
    first = int(np.ceil((window["aos_utc"].to_datetime64() - run.start_utc) / np.timedelta64(1, "s")))
    last = int(np.floor((window["los_utc"].to_datetime64() - run.start_utc) / np.timedelta64(1, "s")))
    seconds = np.arange(first, last)
    times = run.start_utc + (1_000 // STEPS) * np.arange(first * STEPS, last * STEPS).astype("timedelta64[ms]")
    site = run.sites["Strand"]
    refraction = run.policy.refraction != "off"
    chain = chains_between(run, window["spacecraft"], "Dish")[0]
    wanted = look_angles(run.orbits[window["spacecraft"]], site, times, refraction=refraction)
    others = [name for name in run.orbits if name != window["spacecraft"]]
    shares = np.zeros((len(others), seconds.size, STEPS))
    for k, name in enumerate(others):
        look = look_angles(run.orbits[name], site, times, refraction=refraction)
        cosine = np.sum(pointing_vectors(wanted.azimuth_deg, wanted.elevation_deg)
                        * pointing_vectors(look.azimuth_deg, look.elevation_deg), axis=1)
        apart_deg = np.degrees(np.arccos(np.clip(cosine, -1.0, 1.0)))
        ratio_db = c_over_i_db(run, chain, name, site, (wanted, look), apart_deg)
        shares[k] = (10.0 ** ((REQUIRED_DB - ratio_db) / 10.0)).reshape(-1, STEPS)
    return seconds, others, shares


def _covered(found: Interference, victim: str, other: str, seconds: np.ndarray) -> np.ndarray:
    inside = np.zeros(seconds.size, bool)
    for pair in found.pairs:
        if (pair.victim, pair.interferer) == (victim, other):
            inside |= (seconds >= pair.start_s) & (seconds < pair.end_s)
    return inside


@pytest.fixture(scope="module", params=["off", "itu_p834"])
def case(request: pytest.FixtureRequest) -> tuple[Run, pd.DataFrame, Interference]:
    run = sisters(ORBITS, required_c_over_i_db=REQUIRED_DB, refraction=request.param)
    windows = windows_of(run)
    return run, windows, find_interference(run, windows)


def test_pairs_are_those_of_the_plain_search(case: tuple[Run, pd.DataFrame, Interference]) -> None:
    run, windows, found = case
    hits = 0
    for _, window in windows.iterrows():
        seconds, others, shares = _brute_shares(run, window)
        for k, other in enumerate(others):
            covered = _covered(found, window["spacecraft"], other, seconds)
            too_much = (shares[k] > 1.0).any(axis=1)
            assert not np.any(too_much & ~covered), (window["spacecraft"], other)
            # Nothing else: a second, or one beside it, comes within a tenth of a dB of what is tolerated.
            close = (shares[k] > 10.0**-0.01).any(axis=1)
            close = close | np.roll(close, 1) | np.roll(close, -1)
            assert not np.any(covered & ~close), (window["spacecraft"], other)
            hits += int(too_much.sum())
    assert hits > 100


def test_crowds_hold_whenever_several_are_together_too_much(case: tuple[Run, pd.DataFrame, Interference]) -> None:
    run, windows, found = case
    crowded = 0
    for _, window in windows.iterrows():
        seconds, others, shares = _brute_shares(run, window)
        alone = np.stack([_covered(found, window["spacecraft"], other, seconds) for other in others])
        each = np.where(alone, 0.0, shares.max(axis=2))
        own = [c for c in found.crowds if c.victim == window["spacecraft"]]
        for at in np.flatnonzero(np.where(alone[:, :, None], 0.0, shares).sum(axis=0).max(axis=1) > 1.0 + NEGLECTED):
            crowded += 1
            crowd = next(c for c in own if c.start_s <= seconds[at] < c.end_s)
            told = dict(zip(crowd.interferers, crowd.shares, strict=True))
            assert sum(told.values()) > 1.0
            for k, other in enumerate(others):
                assert told.get(other, NEGLECTED) >= 0.995 * each[k, at]
    assert crowded > 20
    assert all(max(c.shares) <= 1.0 and 0 < c.end_s - c.start_s <= 10 for c in found.crowds)


def test_nothing_is_judged_without_a_demand_or_a_known_beam(case: tuple[Run, pd.DataFrame, Interference]) -> None:
    run, windows, _ = case
    calm = replace(run, policy=run.policy.model_copy(update={"required_c_over_i_db": None}))
    assert find_interference(calm, windows) == Interference()
    deaf = run.receivers["rx"].model_copy(update={
        "gain_dbi": None, "noise_temperature_k": None, "g_over_t_db_per_k": 29.3})
    assert find_interference(replace(run, receivers={"rx": deaf}), windows) == Interference()


def test_a_crossed_polarisation_or_another_band_keeps_the_peace() -> None:
    two = {"Lapwing": orbit(70.0), "Dunlin": orbit(69.98)}
    run = sisters(two, required_c_over_i_db=REQUIRED_DB)
    windows = windows_of(run)
    assert {p.victim for p in find_interference(run, windows).pairs} == {"Lapwing", "Dunlin"}
    for change in ({"polarisation": "LHCP"}, {"frequency_mhz": 8_300.0}):
        radios = {**run.radios, "x-Dunlin": run.radios["x-Dunlin"].model_copy(update=change)}
        assert find_interference(replace(run, radios=radios), windows) == Interference()
