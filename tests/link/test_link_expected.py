from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from link_bench import X_RADIO, network, passes

from passplan.inputs.ground import Site
from passplan.inputs.run import Run
from passplan.link.expected import PERCENT_NODES, PlannedContact, expected_volumes, node_weights, under_percent
from passplan.link.profiles import link_profiles

KA = X_RADIO.model_copy(update={"name": "x", "frequency_mhz": 8_300.0, "rate_control": "adaptive"})
WET = Site(name="Strand", latitude_deg=3.1, longitude_deg=101.7)
DRY = Site(name="Strand", latitude_deg=34.3, longitude_deg=-106.7, height_m=1_500.0)


def _run(site: Site, eirp_dbw: float, kind: str) -> Run:
    radio = X_RADIO.model_copy(update={
        "eirp_dbw": eirp_dbw, "rate_control": kind, "hysteresis_db": 0.0, "min_dwell_s": 0})
    return replace(network(radios=(radio,), unavailability_percent=0.1), sites={"Strand": site})


def _planned(run: Run, shape: tuple[float, float, float, float]) -> tuple[list[PlannedContact], tuple]:  # type: ignore[type-arg]
    windows, samples = passes(shape)
    profile = link_profiles(run, windows, samples)[0].downlink
    end_s = int(samples.time_s[-1])
    choice = None if profile is None else profile.best(0, end_s)
    if choice is None:
        return [], (windows, samples)
    return [PlannedContact(0, 0, end_s, choice.radio, choice.modcod, choice.rate_mbps)], (windows, samples)


def test_the_nodes_share_out_the_year() -> None:
    weights = node_weights()
    assert weights.sum() == pytest.approx(1.0)
    assert np.all(weights > 0.0)
    assert len(weights) == len(PERCENT_NODES)


@settings(deadline=None, max_examples=12)
@given(
    st.sampled_from([WET, DRY]), st.sampled_from([0.0, 4.0, 8.0, 12.0]), st.sampled_from(["per-contact", "adaptive"]),
    st.floats(300.0, 700.0),
)
def test_the_expectation_lies_within_the_distribution(site: Site, eirp_dbw: float, kind: str, length_s: float) -> None:
    run = _run(site, eirp_dbw, kind)
    contacts, (windows, samples) = _planned(run, (0.0, length_s, 550.0, 2.0))
    for found in expected_volumes(run, windows, samples, contacts):
        assert found.least_mb <= found.mean_mb <= found.greatest_mb
        assert found.least_mb <= found.p10_mb <= found.p50_mb <= found.p90_mb <= found.greatest_mb


def test_an_adaptive_link_carries_more_on_average_than_it_holds_at_a_tenth_of_a_percent() -> None:
    run = _run(WET, 2.0, "adaptive")
    contacts, (windows, samples) = _planned(run, (0.0, 650.0, 550.0, 2.0))
    held = link_profiles(run, windows, samples)[0].downlink
    assert held is not None
    choice = held.best(contacts[0].start_s, contacts[0].end_s)
    assert choice is not None
    found = expected_volumes(run, windows, samples, contacts)[0]
    assert found.mean_mb > 1.05 * choice.volume_mb


def test_a_planned_modcod_brings_no_more_in_fine_weather_than_while_it_lasts() -> None:
    run = _run(DRY, 10.0, "per-contact")
    contacts, (windows, samples) = _planned(run, (0.0, 650.0, 550.0, 2.0))
    found = expected_volumes(run, windows, samples, contacts)[0]
    assert found.greatest_mb <= contacts[0].rate_mbps * (contacts[0].end_s - 20) / 8.0
    assert found.least_mb < found.greatest_mb


def test_a_dry_site_is_worth_more_than_a_wet_one() -> None:
    means = []
    for site in (WET, DRY):
        run = _run(site, 0.0, "adaptive")
        contacts, (windows, samples) = _planned(run, (0.0, 650.0, 550.0, 2.0))
        means.append(expected_volumes(run, windows, samples, contacts)[0].mean_mb)
    assert means[1] > means[0]


def test_the_rain_of_the_day_is_no_part_of_the_year() -> None:
    run = _run(WET, 0.0, "adaptive")
    soaked = replace(run, sites={"Strand": WET.model_copy(update={"rain_rate_mm_per_h": 80.0})})
    assert under_percent(soaked, 1.0).sites["Strand"].rain_rate_mm_per_h is None
    assert under_percent(soaked, 1.0).policy.unavailability_percent == 1.0


def test_no_contact_no_figures() -> None:
    windows, samples = passes((0.0, 650.0, 550.0, 2.0))
    assert expected_volumes(network(), windows, samples, []) == []
