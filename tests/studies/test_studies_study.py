"""Study files and their variants, and what a comparison may claim."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pandas as pd
import pytest

from passplan.inputs.errors import InputError
from passplan.inputs.load import load_run
from passplan.studies.study import apply, read_study
from passplan.studies.whatif import BETTER, UNCLEAR, WORSE, compare

WHATIF = "configs/whatif.toml"


def _day(variant: str, day: int, value: float, bound: float) -> dict[str, object]:
    return {"variant": variant, "start_utc": pd.Timestamp(2027, 3, day), "contacts": 10, "volume_mb": 100.0,
            "value": value, "bound": bound, "gap": 0.0, "status": "within_gap", "cost": 0.0,
            "lost_mb": 0.0, "shortfalls": 0}


def test_variants_of_the_sample(sample: Path) -> None:
    study = read_study(sample / WHATIF)
    run = load_run(study.base)
    second, without, bigger = (apply(variant, run, study.file) for variant in study.variants)
    assert set(second.antennas) - set(run.antennas) == {"Isvarde-C"}
    assert set(run.antennas) - set(without.antennas) == {"Orrin-A"}
    assert all(closure.antenna != "Orrin-A" for closure in without.closures)
    assert bigger.antennas["Isvarde-B"].receivers == ("x-7m", "ka-5m")
    assert bigger.antennas["Isvarde-B"].min_elevation_deg == run.antennas["Isvarde-B"].min_elevation_deg


@pytest.mark.parametrize(
    ("old", "new", "parts"),
    [
        ('remove_antennas = ["Orrin-A"]', 'remove_antennas = ["Orin-A"]', ("without Orrin", "did you mean 'Orrin-A'?")),
        ('site = "Isvarde"', 'site = "Isvarda"', ("Isvarde-C", "Isvarda", "did you mean 'Isvarde'?")),
        ("min_elevation_deg = 5", "min_elevation_deg = 95", ("add_antenna[1]", "min_elevation_deg", "below 90")),
        ('name = "Isvarde-B"', 'name = "Isvarde-X"', ("change_antenna[1]", "Isvarde-X")),
    ],
)
def test_a_variant_that_does_not_fit(
    sample: Path, edit: Callable[..., Path], old: str, new: str, parts: tuple[str, ...]
) -> None:
    edit(WHATIF, old, new)
    study = read_study(sample / WHATIF)
    run = load_run(study.base)
    with pytest.raises(InputError) as caught:
        for variant in study.variants:
            apply(variant, run, study.file)
    for part in parts:
        assert part in str(caught.value)


@pytest.mark.parametrize(
    ("old", "new", "part"),
    [
        ("days = 2", "days = 0", "days = 0"),
        ("remove_antennas", "remove_antena", "did you mean 'remove_antennas'?"),
        ('name = "without Orrin"', 'name = "base"', "used twice"),
        ("days = 2", "dais = 2", "did you mean 'days'?"),
        ('base = "daily.toml"', "", "missing"),
    ],
)
def test_a_study_file_with_a_fault(sample: Path, edit: Callable[..., Path], old: str, new: str, part: str) -> None:
    edit(WHATIF, old, new)
    with pytest.raises(InputError, match=r"whatif\.toml") as caught:
        read_study(sample / WHATIF)
    assert part in str(caught.value)


def test_a_verdict_needs_a_proof() -> None:
    days = pd.DataFrame([
        _day("base", 1, 100.0, 102.0), _day("base", 2, 50.0, 51.0),
        _day("up", 1, 103.0, 104.0), _day("up", 2, 52.0, 53.0),
        _day("same", 1, 101.0, 103.0), _day("same", 2, 51.0, 52.0),
        _day("down", 1, 90.0, 95.0), _day("down", 2, 40.0, 45.0),
    ])
    table = compare(days).set_index("variant")
    assert table.loc["up", "verdict"] == BETTER
    assert table.loc["same", "verdict"] == UNCLEAR
    assert table.loc["down", "verdict"] == WORSE
    assert table.loc["base", "verdict"] == ""
    assert table.loc["same", "difference"] == 2.0
    assert table.loc["same", "difference_low"] == 152.0 - 153.0
    assert table.loc["same", "difference_high"] == 155.0 - 150.0
    assert table.loc["up", "days_better"] == 2
    assert table.loc["same", "days_better"] == 0
    assert table.loc["base", "gap"] == pytest.approx(3.0 / 153.0)
