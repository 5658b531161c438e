"""Pointing tables: the header, the numbers, the Doppler by differences, and the expiry."""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np
import pytest

from passplan.geometry.motion import LIGHT_KM_S
from passplan.geometry.pointing import look_angles
from passplan.geometry.refraction import apparent_deg
from passplan.inputs.run import Run
from passplan.planning.record import PlanRecord
from passplan.report.cautions import CAUTIONS
from passplan.report.expiry import RECORD, ExpiredError, latest_use, settle_expiry
from passplan.report.pointing_tables import (
    Issue,
    pointing_table,
    read_pointing_table,
    write_pointing_tables,
)

EXPIRES = "2027-03-09T20:00:00.000Z"


@pytest.fixture(scope="module")
def written(short_plan: PlanRecord, short_run: Run, tmp_path_factory: pytest.TempPathFactory) -> list[Path]:
    folder = tmp_path_factory.mktemp("pointing")
    first = replace(short_plan, contacts=short_plan.contacts.head(6))
    return write_pointing_tables(first, short_run, folder, Issue(1.0, EXPIRES))


def test_one_table_for_each_contact_second_by_second(written: list[Path], short_plan: PlanRecord) -> None:
    for path, row in zip(written, short_plan.contacts.head(6).itertuples(), strict=True):
        header, table = read_pointing_table(path)
        assert header["contact"] == row.contact_id
        assert len(table) == row.duration_s + 1
        assert table["utc"].iloc[0] == row.start_utc
        assert table["utc"].iloc[-1] == row.end_utc
        assert (np.diff(table["utc"].to_numpy()) == np.timedelta64(1, "s")).all()
        assert table["elevation_deg"].max() <= row.peak_elevation_deg + 0.01
        assert (table["elevation_deg"] > 3.0).all()


def test_the_header_says_what_a_controller_must_know(written: list[Path], short_plan: PlanRecord) -> None:
    header, _ = read_pointing_table(written[0])
    row = short_plan.contacts.iloc[0]
    assert header["plan_id"] == short_plan.summary["plan_id"]
    assert header["approval"].startswith("DRAFT")
    assert header["valid_from_utc"] == f"{row['start_utc'].isoformat(timespec='milliseconds')}Z"
    assert header["element_epoch_utc"] == short_plan.summary["spacecraft"][row["spacecraft"]]["element_epoch_utc"]
    assert header["expires_utc"] == EXPIRES
    assert header["refraction"].startswith("not included")
    assert header["caution"].splitlines() == list(CAUTIONS)


def test_range_rate_and_doppler_agree_with_differences_of_range(written: list[Path]) -> None:
    tables = [read_pointing_table(path)[1] for path in written]
    table = next(one for one in tables if sum(name.startswith("doppler_") for name in one.columns) == 2)
    rate = (table["range_km"].to_numpy()[2:] - table["range_km"].to_numpy()[:-2]) / 2.0
    assert np.abs(rate - table["range_rate_km_s"].to_numpy()[1:-1]).max() < 2e-4
    names = [name[8:-3] for name in table.columns if name.startswith("doppler_")]
    for name in names:
        shift, station = table[f"doppler_{name}_hz"], table[f"station_{name}_hz"]
        # The tuned frequency and the shift differ by the carrier, which does not move.
        down = not name.endswith("command")
        carrier = station - shift if down else station + shift
        assert np.ptp(carrier) <= 0.21
        assert np.abs(shift + carrier * table["range_rate_km_s"] / LIGHT_KM_S).max() < 0.2


def test_a_command_arrives_at_its_carrier(short_plan: PlanRecord, short_run: Run) -> None:
    row = short_plan.contacts[short_plan.contacts["service"] == "both"].iloc[0]
    table = pointing_table(row, short_run, 10.0)
    arriving = table["station_s-command_hz"] * (1.0 - table["range_rate_km_s"] / LIGHT_KM_S)
    assert np.ptp(arriving) < 2.0


def test_where_the_policy_counts_refraction_elevations_are_apparent(
    short_plan: PlanRecord, short_run: Run, tmp_path: Path
) -> None:
    bent_run = replace(short_run, policy=short_run.policy.model_copy(update={"refraction": "itu_p834"}))
    row = short_plan.contacts.iloc[0]
    bent, straight = pointing_table(row, bent_run), pointing_table(row, short_run)
    site = short_run.sites[row["site"]]
    look = look_angles(short_run.orbits[row["spacecraft"]], site, straight["utc"].to_numpy())
    assert straight["elevation_deg"].to_numpy() == pytest.approx(look.elevation_deg, abs=1e-9)
    raised = bent["elevation_deg"].to_numpy() - look.elevation_deg
    expected = apparent_deg(look.elevation_deg, site.height_m / 1e3) - look.elevation_deg
    assert raised == pytest.approx(expected, abs=1e-9)
    assert raised.min() > 0.0
    # About a tenth of a degree at 5 deg of elevation (value from memory), less the higher it stands.
    assert raised.max() == pytest.approx(raised[np.argmin(look.elevation_deg)])
    others = [name for name in straight.columns if name != "elevation_deg"]
    assert bent[others].equals(straight[others])
    one = replace(short_plan, contacts=short_plan.contacts.head(1))
    header, _ = read_pointing_table(write_pointing_tables(one, bent_run, tmp_path, Issue(1.0, EXPIRES))[0])
    assert header["refraction"].startswith("included: elevations are apparent")
    assert "P.834" in header["refraction"]


@pytest.mark.parametrize("step_s", [0.5, 7.0])
def test_any_step_ends_at_the_end(short_plan: PlanRecord, short_run: Run, step_s: float) -> None:
    row = short_plan.contacts.iloc[1]
    table = pointing_table(row, short_run, step_s)
    assert table["utc"].iloc[-1] == row["end_utc"]
    assert len(table) == int(np.ceil(row["duration_s"] / step_s)) + 1


def test_the_expiry_is_remembered_and_only_comes_forward(short_run: Run, tmp_path: Path) -> None:
    now = datetime(2027, 3, 9, 9, tzinfo=UTC)
    first, later = now + timedelta(hours=3), now + timedelta(hours=5)
    assert settle_expiry(tmp_path, short_run, first, now) == "2027-03-09T12:00:00.000Z"
    assert settle_expiry(tmp_path, short_run, later, now) == "2027-03-09T12:00:00.000Z"
    assert settle_expiry(tmp_path, short_run, None, now) == "2027-03-09T12:00:00.000Z"
    with pytest.raises(ExpiredError, match="expired at 2027-03-09T12"):
        settle_expiry(tmp_path, short_run, None, first)
    with pytest.raises(ExpiredError, match="expired at"):
        settle_expiry(tmp_path, short_run, later, first + timedelta(seconds=1))


def test_without_a_word_tables_hold_to_the_end_of_the_horizon_at_most(short_run: Run, tmp_path: Path) -> None:
    now = datetime(2027, 3, 9, 9, tzinfo=UTC)
    assert settle_expiry(tmp_path, short_run, None, now) == "2027-03-10T08:00:00.000Z"
    assert not (tmp_path / RECORD).exists()
    tight = short_run.policy.model_copy(update={"element_refuse_age_days": 1.0})
    assert latest_use(replace(short_run, policy=tight)) < datetime(2027, 3, 9, 20, tzinfo=UTC)


def test_an_expiry_in_the_past_or_unreadable_is_refused(short_run: Run, tmp_path: Path) -> None:
    now = datetime(2027, 3, 9, 9, tzinfo=UTC)
    with pytest.raises(ExpiredError, match="has passed"):
        settle_expiry(tmp_path, short_run, now - timedelta(seconds=1), now)
    (tmp_path / RECORD).write_text("{", encoding="utf-8")
    with pytest.raises(ExpiredError, match="not readable"):
        settle_expiry(tmp_path, short_run, None, now)
