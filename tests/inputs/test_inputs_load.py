"""A run read from good input: tables in either form, paths, and the copies that a plan carries."""

from __future__ import annotations

from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest

from passplan.inputs.elements.model import ElementSet
from passplan.inputs.load import load_run
from passplan.inputs.matching import matching_loss_db, polarisation_loss_db

DAILY = "configs/daily.toml"


def test_the_sample_is_the_network_that_the_readme_describes(sample: Path) -> None:
    run = load_run(sample / DAILY)
    assert (len(run.spacecraft), len(run.sites), len(run.antennas)) == (14, 4, 7)
    assert run.horizon_s == 86_400
    assert not run.left_out
    assert set(run.orbits) == set(run.spacecraft)
    receive_only = [name for name, antenna in run.antennas.items() if not antenna.transmitters]
    assert receive_only == ["Isvarde-B", "Tarrow-K"]
    assert [name for name, antenna in run.antennas.items() if antenna.price_per_minute] == ["Orrin-A"]
    assert {closure.antenna for closure in run.closures} == {"Ellery-A", "Orrin-A"}
    assert run.spacecraft["Ambril-5"].radios == run.spacecraft["Ambril-6"].radios
    assert [request.name for request in run.requests] == ["new coast schedule"]


def test_both_twins_of_the_sample_elements_are_the_same_sets(sample: Path, edit: Callable[..., Path]) -> None:
    first = load_run(sample / DAILY)
    edit(DAILY, "elements.json", "elements.tle")
    second = load_run(sample / DAILY)
    for name, source in first.orbits.items():
        twin = second.orbits[name]
        assert isinstance(source, ElementSet)
        assert isinstance(twin, ElementSet)
        # The TLE's epoch has a resolution of 1e-8 day, 0.9 ms.
        assert abs(source.epoch_utc - twin.epoch_utc) <= np.timedelta64(1, "ms")
        assert source.catalogue_number == twin.catalogue_number


def test_fleet_and_ground_as_csv_give_the_same_run(sample: Path) -> None:
    first = load_run(sample / DAILY)
    folder = sample / "sample_fleet"
    for file, key, records in (
        ("fleet.toml", "spacecraft", first.spacecraft), ("ground.toml", "antenna", first.antennas),
        ("ground.toml", "site", first.sites), ("ground.toml", "receiver", first.receivers),
        ("ground.toml", "transmitter", first.transmitters),
    ):
        _write_csv(folder / f"{key}.csv", list(records.values()))
        text = (folder / file).read_text(encoding="utf-8")
        blocks = text.split("\n[[")
        kept = [blocks[0]] + [block for block in blocks[1:] if not block.startswith(f"{key}]]")]
        (folder / file).write_text(f'{key} = "{key}.csv"\n' + "\n[[".join(kept), encoding="utf-8")
    second = load_run(sample / DAILY)
    for part in ("spacecraft", "antennas", "sites", "receivers", "transmitters", "radios"):
        assert getattr(second, part) == getattr(first, part), part


def _write_csv(path: Path, records: list[object]) -> None:
    rows = [record.model_dump(exclude_defaults=True) for record in records]  # type: ignore[attr-defined]
    columns = list(dict.fromkeys(key for row in rows for key in row))

    def cell(value: object) -> str:
        if isinstance(value, tuple):
            return ";".join(":".join(map(str, item)) if isinstance(item, tuple) else str(item) for item in value)
        return "" if value is None else str(value)

    lines = [",".join(columns)] + [",".join(cell(row.get(column)) for column in columns) for row in rows]
    path.write_text("\r\n".join(lines) + "\r\n", encoding="utf-8")


def test_policy_from_its_own_file(sample: Path) -> None:
    config = sample / DAILY
    text = config.read_text(encoding="utf-8")
    head, policy = text.split("[policy]\n")
    (sample / "configs/house.toml").write_text(policy, encoding="utf-8")
    config.write_text(head + 'policy = "house.toml"\n', encoding="utf-8")
    assert load_run(config).policy.min_contact_s == 150.0
    assert load_run(config, policy={"min_contact_s": 90}).policy.min_contact_s == 90.0


def test_start_moves_the_horizon(sample: Path) -> None:
    run = load_run(sample / DAILY, start=datetime(2027, 3, 10, 6, tzinfo=UTC))
    assert run.start_utc == np.datetime64("2027-03-10T06:00:00")
    assert run.end_utc == np.datetime64("2027-03-11T06:00:00")


def test_an_end_keeps_its_distance_when_the_start_moves(sample: Path, edit: Callable[..., Path]) -> None:
    edit(DAILY, "hours = 24", "end = 2027-03-09T12:00:00+02:00")
    assert load_run(sample / DAILY).horizon_s == 10 * 3600
    assert load_run(sample / DAILY, start=datetime(2027, 3, 10, tzinfo=UTC)).horizon_s == 10 * 3600


def test_a_drop_folder_of_elements(sample: Path, edit: Callable[..., Path]) -> None:
    folder = sample / "sample_fleet" / "drop"
    folder.mkdir()
    (sample / "sample_fleet/elements.json").rename(folder / "a.json")
    (sample / "sample_fleet/elements.tle").rename(folder / "b.tle")
    edit(DAILY, "elements.json", "drop")
    run = load_run(sample / DAILY)
    assert len(run.orbits) == 14
    assert (run.elements["use"] == "chosen").sum() == 14
    assert len(run.elements) == 28


def test_files_are_remembered_as_read(sample: Path) -> None:
    run = load_run(sample / DAILY)
    paths = [file.path for file in run.files]
    assert paths[0] == "daily.toml"
    assert "../sample_fleet/radios.csv" in paths
    stored = {}
    for i, file in enumerate(run.files):
        copy = sample / "copies" / (f"{i}" if i else "daily.toml")
        copy.parent.mkdir(exist_ok=True)
        copy.write_bytes(file.content)
        stored[file.path] = copy
    again = load_run(sample / "copies" / "daily.toml", stored=stored)
    assert again.spacecraft == run.spacecraft
    assert again.closures == run.closures
    assert [file.sha256 for file in again.files] == [file.sha256 for file in run.files]


@pytest.mark.parametrize(
    ("sent", "taken", "loss_db"),
    [("RHCP", "RHCP", 0.0), ("RHCP", "LHCP", None), ("H", "V", None), ("H", "RHCP", 3.0103), ("LHCP", "V", 3.0103)],
)
def test_polarisations(sent: str, taken: str, loss_db: float | None) -> None:
    assert polarisation_loss_db(sent, taken) == loss_db
    assert polarisation_loss_db(taken, sent) == loss_db


def test_a_transmitter_never_serves_a_downlink(sample: Path) -> None:
    run = load_run(sample / DAILY)
    downlink, command = run.radios["s-2215"], run.radios["s-command"]
    assert matching_loss_db(downlink, run.receivers["s-7m"]) == 0.0
    assert matching_loss_db(downlink, run.transmitters["s-up-7m"]) is None
    assert matching_loss_db(command, run.transmitters["s-up-7m"]) == 0.0
    assert matching_loss_db(command, run.receivers["s-7m"]) is None
