from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from link_bench import COMMAND_RADIO, X_RADIO, network, passes, with_radio

from passplan.link import profiles
from passplan.link.profiles import WindowLink, link_profiles

SHAPES = [(1_000.0 + 900.0 * i, 300.0 + 60.0 * i, 450.0 + 50.0 * i, 2.0 * i) for i in range(6)]


def _summary(links: list[WindowLink]) -> list[object]:
    return [
        (
            link.downlink and link.downlink.best(0, 80_000),
            link.command and link.command.best(0, 80_000),
        )
        for link in links
    ]


def test_one_link_per_window_in_order() -> None:
    windows, samples = passes(*SHAPES)
    links = link_profiles(network(), windows, samples)
    assert len(links) == len(windows)
    for link, (aos_s, duration_s, _, _) in zip(links, SHAPES, strict=True):
        assert link.downlink is not None
        choice = link.downlink.best(0, 80_000)
        assert choice is not None
        assert aos_s <= choice.send_start_s < choice.send_end_s <= aos_s + duration_s


def test_blocks_change_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    windows, samples = passes(*SHAPES)
    whole = _summary(link_profiles(network(), windows, samples))
    for size in (1, 50, 97):
        monkeypatch.setattr(profiles, "_BLOCK_SAMPLES", size)
        assert _summary(link_profiles(network(), windows, samples)) == whole


def test_no_windows() -> None:
    windows, samples = passes((0.0, 60.0, 500.0, 0.0))
    assert link_profiles(network(), windows.iloc[:0], samples) == []


def test_a_spacecraft_that_nobody_hears_has_empty_links() -> None:
    deaf = network(receivers=(), transmitters=())
    assert _summary(link_profiles(deaf, *passes(*SHAPES))) == [(None, None)] * len(SHAPES)


def test_a_radio_too_weak_gives_no_downlink() -> None:
    links = link_profiles(with_radio(network(), eirp_dbw=-40.0), *passes(*SHAPES))
    assert all(link.downlink is None and link.command is not None for link in links)


def test_quality_is_continuous_along_a_pass() -> None:
    # From horizon to horizon at 1 s, across every join of the gas law.
    windows, samples = passes((0.0, 700.0, 500.0, 0.5), step_s=1.0)
    links = link_profiles(network(radios=(X_RADIO,), required_margin_db=0.0), windows, samples)
    assert links[0].downlink is not None
    assert np.abs(np.diff(links[0].downlink.tracks[0].quality_db)).max() < 0.3


def test_gas_and_free_space_both_count() -> None:
    windows, samples = passes((0.0, 600.0, 500.0, 0.0))
    link = link_profiles(network(radios=(X_RADIO,)), windows, samples)[0]
    assert link.downlink is not None
    track = link.downlink.tracks[0]
    bare = track.chain.merit_db - 20.0 * np.log10(4.0 * np.pi * samples.range_km * 1e3 * 8.2e9 / 299_792_458.0)
    gas = bare - track.quality_db
    assert np.all(gas > 0.04)
    assert gas.argmin() == samples.elevation_deg.argmax()


def test_windows_of_several_pairs_keep_to_their_own_chains() -> None:
    windows, samples = passes(*SHAPES[:2])
    run = network(radios=(X_RADIO, COMMAND_RADIO))
    other = run.spacecraft["Plover"].model_copy(update={"name": "Dunlin", "radios": ("up",)})
    run = type(run)(**{**run.__dict__, "spacecraft": {**run.spacecraft, "Dunlin": other}})
    mixed = pd.DataFrame({"spacecraft": ["Dunlin", "Plover"], "antenna": ["Dish", "Dish"]})
    links = link_profiles(run, mixed, samples)
    assert (links[0].downlink is None, links[1].downlink is None) == (True, False)
    assert len(windows) == len(links)
