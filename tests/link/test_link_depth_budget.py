"""Budgets with everything on, computed by hand, and the table-driven samples against the line-by-line terms."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from link_bench import RECEIVER, X_RADIO, network, passes, with_radio

from passplan.geometry.pointing import LookAngles, Samples, look_angles, sample_windows
from passplan.geometry.survey import Ground, find_losses
from passplan.geometry.windows import find_windows
from passplan.inputs.elements.mean import MeanElements, element_set
from passplan.inputs.fleet import CommandRadio, DownlinkRadio
from passplan.inputs.ground import Receiver, Transmitter
from passplan.inputs.pfd import PfdLimit
from passplan.inputs.run import Run
from passplan.link import lines
from passplan.link.budget import off_nadir_deg, power_flux_density_dbw_per_m2
from passplan.link.chains import chains_between, radiated_dbw
from passplan.link.lines import BudgetLine, budget_lines, link_along
from passplan.link.notices import run_notices
from passplan.link.profiles import link_profiles
from passplan.link.sun_noise import closest_deg
from passplan.link.terms import path_terms

LOW = MeanElements(
    name="PLOVER", catalogue_number=90_001, international_designator="2027-001A", epoch_days=9_928, epoch_s=43_200.0,
    mean_motion_rev_per_day=15.2, eccentricity=0.001, inclination_deg=97.4, raan_deg=120.0,
    argument_of_perigee_deg=90.0, mean_anomaly_deg=10.0, bstar_per_earth_radius=1e-4,
)
NOON = np.datetime64("2027-03-09T12:00:00", "ms")
KA_RADIO = DownlinkRadio(
    name="ka", direction="downlink", frequency_mhz=26_250.0, polarisation="LHCP", transmit_power_w=2.0,
    antenna_gain_dbi=18.0, transmit_loss_db=1.0, back_off_db=2.0, symbol_rate_msps=60.0, pointing_loss_db=0.5,
    pattern=((0.0, 0.0), (30.0, 1.0), (65.0, 4.0)),
)
KA_RECEIVER = Receiver(
    name="ka-rx", low_mhz=25_500.0, high_mhz=27_000.0, polarisations=("LHCP",), gain_dbi=61.2, diameter_m=5.4,
    receiver_noise_k=130.0, antenna_noise_k=6.0, spill_over_k=8.0, feeder_loss_db=0.2, pointing_loss_db=0.6,
)


def _ka(**policy: object) -> Run:
    return network(radios=(KA_RADIO,), receivers=(KA_RECEIVER,), transmitters=(), **policy)


def _look(elevation_deg: float, range_km: float) -> LookAngles:
    return LookAngles(np.array([120.0]), np.array([elevation_deg]), np.array([range_km]), np.zeros(1))


# For a circular orbit at 600 km over a sphere of 6 371 km: range by the triangle, sin(nadir) = R cos(el) / (R + h).
@pytest.mark.parametrize(
    ("elevation_deg", "range_km", "free_space_db", "nadir_deg", "pattern_db"),
    [(5.0, 2_328.8, 188.17, 65.56, 4.0), (30.0, 1_075.1, 181.46, 52.32, 2.91), (90.0, 600.0, 176.39, 0.0, 0.0)],
)
def test_a_ka_budget_by_hand(
    elevation_deg: float, range_km: float, free_space_db: float, nadir_deg: float, pattern_db: float
) -> None:
    """By hand: EIRP 3.01 + 18 - 1 - 2 = 18.01 dBW; the air's three figures are taken as the tables give them.

    Sky noise 275 (1 - x) + 2.7 x with x = 10^(-A/10); T = (sky + 14) / 1.0471 + 290 (1 - 1 / 1.0471) + 130;
    G = 61.0 dBi; Es/N0 = EIRP - losses + G - 10 log10 T + 228.60 - 77.78, less 1.5 dB.
    """
    run = _ka(unavailability_percent=0.5)
    chain = chains_between(run, "Plover", "Dish")[0]
    terms = path_terms(run, "Dish", chain, _look(elevation_deg, range_km), np.array([NOON]))
    assert radiated_dbw(KA_RADIO) == pytest.approx(18.01, abs=0.005)
    assert float(terms.free_space_db[0]) == pytest.approx(free_space_db, abs=0.01)
    assert terms.off_nadir_deg is not None
    assert float(terms.off_nadir_deg[0]) == pytest.approx(nadir_deg, abs=0.1)
    assert float(terms.pattern_db[0]) == pytest.approx(pattern_db, abs=0.02)
    air = terms.air
    through = 10.0 ** (-float(air.gas_db[0] + air.rain_db[0] + air.cloud_db[0]) / 10.0)
    noise_k = (275.0 * (1.0 - through) + 2.7 * through + 14.0) / 1.0471 + 290.0 * (1.0 - 1.0 / 1.0471) + 130.0
    loss_db = free_space_db + pattern_db + 0.5 + 0.6 + float(air.total_db[0])
    by_hand = 18.01 - loss_db + 61.0 - 10.0 * np.log10(noise_k) + 228.60 - 77.78 - 1.5
    assert float(terms.quality_db[0]) == pytest.approx(by_hand, abs=0.1)


def test_tables_and_terms_agree_along_a_pass_with_everything_on() -> None:
    run = _ka(unavailability_percent=0.5, sun_noise=True)
    windows, samples = passes((40_000.0, 700.0, 600.0, 1.0))
    profile = link_profiles(run, windows, samples)[0].downlink
    assert profile is not None
    look = LookAngles(samples.azimuth_deg, samples.elevation_deg, samples.range_km, samples.range_rate_km_s)
    times = run.start_utc + (samples.time_s * 1e3).astype("timedelta64[ms]")
    chain = chains_between(run, "Plover", "Dish")[0]
    terms = path_terms(run, "Dish", chain, look, times)
    assert profile.tracks[0].quality_db == pytest.approx(terms.quality_db, abs=0.01)


@pytest.fixture
def shown(monkeypatch: pytest.MonkeyPatch) -> Run:
    def look(_source: object, _site: object, times: np.ndarray, **_: object) -> LookAngles:
        flat = np.ones(len(times))
        return LookAngles(180.0 * flat, 4.0 * flat, 2_400.0 * flat, 0.0 * flat)

    monkeypatch.setattr(lines, "look_angles", look)
    return replace(_ka(unavailability_percent=0.5, sun_noise=True), orbits={"Plover": None})


def _numbers(found: list[BudgetLine]) -> dict[str, float]:
    return {line.term: line.value for line in found if isinstance(line.value, float)}


def test_every_term_is_shown_and_they_add_up(shown: Run) -> None:
    found = budget_lines(shown, "Plover", "Dish", NOON)
    terms = _numbers(found)
    summed = [
        "EIRP", "pointing loss aboard", "pattern loss aboard", "free-space loss", "gas attenuation", "weather",
        "polarisation loss", "pointing loss on the ground", "G/T", "G/T at this elevation", "Sun",
        "Boltzmann's constant",
    ]
    assert terms["C/N0"] == pytest.approx(sum(terms[name] for name in summed), abs=1e-6)
    assert terms["EIRP"] == pytest.approx(
        terms["  transmit power"] + terms["  antenna gain"] + terms["  loss before the antenna"] + terms["  back-off"]
    )
    combined = np.hypot(terms["  rain"] + terms["  cloud"], terms["  scintillation"])
    assert terms["weather"] == pytest.approx(-combined)
    assert all(line.source for line in found)
    notices = [line.source for line in found if line.term == "notice"]
    assert any("stated from 5 deg" in text for text in notices)
    assert any("4 to 20 GHz" in text for text in notices)
    assert any("not a forecast" in text for text in notices)


def test_the_terms_of_a_pass_are_in_the_table(shown: Run) -> None:
    table = link_along(shown, "Plover", "Dish", np.array([NOON, NOON + np.timedelta64(1, "s")]))
    row = table.iloc[0]
    assert row["weather_db"] == pytest.approx(np.hypot(row["rain_db"] + row["cloud_db"], row["scintillation_db"]))
    assert row["system_noise_k"] > 200.0
    assert 0.0 <= row["sun_separation_deg"] <= 180.0


def test_flux_density_is_flagged_against_the_user_s_limits(shown: Run) -> None:
    # By hand: 18.01 - 4.00 dBW of EIRP over 4 pi (2.4e6 m)^2 = 138.60 dB, 1 MHz of 60 MHz: -17.78 dB.
    terms = _numbers(budget_lines(shown, "Plover", "Dish", NOON))
    assert terms["flux density at ground"] == pytest.approx(-142.2, abs=0.2)
    assert terms["  its limit"] == -115.0
    tight = PfdLimit(
        low_mhz=26_000, high_mhz=27_000, arrival_deg=0, limit_dbw_per_m2=-160, bandwidth_hz=1e6, source="ours"
    )
    flagged = budget_lines(replace(shown, pfd_limits=(tight,)), "Plover", "Dish", NOON)
    line = next(line for line in flagged if line.term == "flux density at ground")
    assert "OVER the limit" in line.source
    assert power_flux_density_dbw_per_m2(0.0, 1.0 / 1e3, 1e6, 4e6) == pytest.approx(-10.0 * np.log10(4.0 * np.pi))


def test_off_nadir_from_slant_range() -> None:
    # Geosynchronous, from the equator: arcsin(6 378.137 cos(el) / 42 164) at 5 deg of elevation is 8.67 deg.
    assert off_nadir_deg([5.0, 90.0], [41_127.0, 35_786.0], 0.0, 0.0) == pytest.approx([8.67, 0.0], abs=0.01)


def test_back_off_and_built_eirp() -> None:
    stated = X_RADIO.model_copy(update={"back_off_db": 3.0})
    assert radiated_dbw(stated) == 12.0
    sender = Transmitter(
        name="tx", low_mhz=2_025, high_mhz=2_110, polarisations=("RHCP",), transmit_power_w=100.0,
        antenna_gain_dbi=35.0, transmit_loss_db=2.0,
    )
    assert radiated_dbw(sender) == pytest.approx(53.0)


def test_pilots_and_roll_off_leave_their_mark_on_the_rate() -> None:
    plain = chains_between(network(), "Plover", "Dish")[0].rungs
    with_pilots = chains_between(with_radio(network(), pilots=True), "Plover", "Dish")[0].rungs
    # QPSK, 360 slots: 32 490 symbols and 22 x 36 of pilots.
    factor = {rung.name: rung.rate_mbps for rung in with_pilots}["QPSK 1/4"] / plain[-1].rate_mbps
    assert factor == pytest.approx(32_490.0 / (32_490.0 + 792.0))


def test_the_ionospheric_allowance_counts_below_one_gigahertz_only() -> None:
    low = X_RADIO.model_copy(update={"name": "u", "frequency_mhz": 401.0})
    receiver = RECEIVER.model_copy(update={"low_mhz": 400.0, "high_mhz": 8_400.0})
    run = network(radios=(X_RADIO, low), receivers=(receiver,), ionospheric_allowance_db=2.5)
    assert [chain.ionospheric_loss_db for chain in chains_between(run, "Plover", "Dish")] == [0.0, 2.5]


def test_commands_wait_for_the_transmit_mask() -> None:
    run = network()
    run = replace(run, orbits={"Plover": element_set(LOW, Path("invented.tle"), "line 1")})
    windows = find_windows(run.orbits, run.antennas, run.sites, run.start_utc, run.end_utc)
    samples = sample_windows(windows, run.orbits, run.sites, run.start_utc)
    masked = run.antennas["Dish"].model_copy(update={"transmit_min_elevation_deg": 23.5})
    ground = Ground({"Dish": masked}, run.sites, {}, {"Dish": np.inf})
    losses = find_losses(windows, run.orbits, ground, run.start_utc)
    free = link_profiles(run, windows, samples)
    held = link_profiles(replace(run, antennas={"Dish": masked}), windows, samples, losses)
    assert windows["peak_elevation_deg"].min() < 23.5 < windows["peak_elevation_deg"].max()
    for k, (before, after) in enumerate(zip(free, held, strict=True)):
        own = slice(samples.offsets[k], samples.offsets[k + 1])
        span = math.ceil(samples.time_s[own][0]), math.floor(samples.time_s[own][-1])
        assert before.command is not None
        assert after.command is not None
        assert after.command.tracks[0].quality_db == pytest.approx(before.command.tracks[0].quality_db)
        choice = after.command.best(*span)
        if windows["peak_elevation_deg"].iat[k] < 23.5:
            assert choice is None
        elif choice is not None:
            acquiring_s = choice.send_start_s - after.command.tracks[0].chain.acquisition_s
            times = run.start_utc + (1e3 * np.array([acquiring_s, choice.send_end_s])).astype("timedelta64[ms]")
            ends = look_angles(run.orbits["Plover"], run.sites["Strand"], times).elevation_deg
            # Rounded inward to whole seconds, in which a low orbit rises by 0.2 deg at that height.
            assert ends == pytest.approx([23.5, 23.5], abs=0.25)
            assert ends.min() > 19.99
    assert any(link.command is not None and link.command.best(0, run.horizon_s) is not None for link in held)
    walled = masked.model_copy(update={"transmit_mask": ((0.0, 89.0), (360.0, 89.0))})
    losses = find_losses(windows, run.orbits, replace(ground, antennas={"Dish": walled}), run.start_utc)
    shut = link_profiles(replace(run, antennas={"Dish": walled}), windows, samples, losses)
    assert [link.command.best(0, run.horizon_s) for link in shut if link.command is not None] == [None] * len(windows)
    assert all(link.downlink is not None for link in shut)


def test_a_receive_only_antenna_commands_nobody() -> None:
    windows, samples = passes((0.0, 700.0, 550.0, 1.0))
    assert link_profiles(network(transmitters=()), windows, samples)[0].command is None


def test_the_sun_in_the_beam_is_felt_between_samples() -> None:
    """A beam that sweeps over the Sun in 2 s, halfway between two samples, is still felt by both."""
    away = np.array([[-0.02, 0.0, 0.0], [0.02, 0.001, 0.0], [0.06, 0.002, 0.0]])
    near = closest_deg(away)
    assert near[0] == near[1] < 0.05
    assert near[2] == pytest.approx(np.degrees(np.hypot(0.02, 0.001)), rel=1e-3)


def test_the_sun_is_no_nearer_from_the_end_of_one_pass_to_the_start_of_the_next() -> None:
    away = np.array([[-0.02, 0.0, 0.0], [0.02, 0.0, 0.0], [-0.02, 0.0, 0.0], [-0.04, 0.0, 0.0]])
    assert closest_deg(away)[1:3] == pytest.approx([0.0, 0.0], abs=1e-9)
    parted = closest_deg(away, np.array([True, False, True, False]))
    assert parted[:2] == pytest.approx([0.0, 0.0], abs=1e-9)
    assert parted[2:] == pytest.approx(np.degrees([0.02, 0.02]), rel=1e-3)


def test_many_passes_at_once_feel_the_sun_as_each_by_itself() -> None:
    """Also: from minute to minute the Sun may be joined by straight lines."""
    run = _ka(sun_noise=True)
    windows, samples = passes(*((4_000.0 * k, 600.0, 550.0, 1.0 + k) for k in range(12)))
    azimuth = (samples.time_s / 240.0 + 190.0) % 360.0
    samples = replace(samples, azimuth_deg=azimuth)
    together = link_profiles(run, windows, samples)
    for k in range(12):
        own = slice(samples.offsets[k], samples.offsets[k + 1])
        single = Samples(
            samples.time_s[own], azimuth[own], samples.elevation_deg[own], samples.range_km[own],
            samples.range_rate_km_s[own], np.array([0, own.stop - own.start]))
        alone = link_profiles(run, windows.iloc[[k]].reset_index(drop=True), single)[0].downlink
        both = together[k].downlink
        assert (alone is None) == (both is None)
        if alone is not None and both is not None:
            assert both.tracks[0].quality_db == pytest.approx(alone.tracks[0].quality_db, abs=2e-3)


def test_the_sun_takes_the_link_only_when_it_is_counted() -> None:
    windows, samples = passes((43_000.0, 400.0, 550.0, 1.0))
    run = _ka()
    from passplan.geometry.sun import sun_look_deg

    times = run.start_utc + (samples.time_s * 1e3).astype("timedelta64[ms]")
    azimuth, elevation = sun_look_deg(run.sites["Strand"], times)
    # Fly along the Sun for the whole pass.
    samples = Samples(
        samples.time_s, azimuth, elevation, samples.range_km, samples.range_rate_km_s, samples.offsets
    )
    quiet = link_profiles(run, windows, samples)[0].downlink
    loud = link_profiles(_ka(sun_noise=True), windows, samples)[0].downlink
    assert quiet is not None
    # About 120 000 x 26.25^-0.75 = 10 350 K on a system of 170 K: 17 to 18 dB.
    drop = quiet.tracks[0].quality_db - (loud.tracks[0].quality_db if loud else -np.inf)
    assert np.all(drop > 15.0)


def test_notices_of_a_run_name_what_was_assumed() -> None:
    run = network(unavailability_percent=0.005)
    windows, _ = passes((0.0, 700.0, 550.0, 1.0))
    found = run_notices(run, windows)
    assert any("that of 0.01 % is taken" in text for text in found)
    assert any("adds no noise" in text for text in found)
    assert all(text.endswith(("link)", "links)")) for text in found)
    assert run_notices(network(), windows) == []


def test_a_command_radio_may_have_a_fixed_antenna_too() -> None:
    radio = CommandRadio(
        name="up", direction="command", frequency_mhz=2_050.0, polarisation="RHCP", g_over_t_db_per_k=-28.0,
        bit_rate_kbps=64.0, pattern=((0.0, 0.0), (90.0, 9.0)),
    )
    windows, samples = passes((0.0, 700.0, 550.0, 1.0))
    fixed = link_profiles(network(radios=(radio,)), windows, samples)[0].command
    steered = link_profiles(network(radios=(radio.model_copy(update={"pattern": ()}),)), windows, samples)[0].command
    assert fixed is not None
    assert steered is not None
    loss = steered.tracks[0].quality_db - fixed.tracks[0].quality_db
    assert loss[0] == loss.max()
    assert loss.min() >= 0.0
