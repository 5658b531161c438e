"""The audit names each way in which a plan breaks a rule of an antenna, a site or the budget."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from audit_bench import Bench

from passplan.inputs.setup_times import SetupTime


def change_antenna(bench: Bench, name: str, **values: Any) -> None:
    antenna = bench.run.antennas[name].model_copy(update=values)
    bench.run = replace(bench.run, antennas={**bench.run.antennas, name: antenna})


def test_setup_of_a_band_and_a_service(bench: Bench) -> None:
    for meant, caught in (
            ({"low_mhz": 8_000, "high_mhz": 8_400}, True), ({"low_mhz": 25_000, "high_mhz": 27_000}, False),
            ({"low_mhz": 2_025, "high_mhz": 2_110}, True), ({"service": "both"}, True),
            ({"service": "command"}, False)):
        spoilt = bench.copy()
        change_antenna(spoilt, "Isvarde-A", setup=(SetupTime(**meant, prepare_s=1_500.0),))
        faults = spoilt.audit()
        assert {fault.kind for fault in faults} == ({"antenna_overlap"} if caught else set()), meant
        if caught:
            assert "1530 s are needed" in faults[0].sentence
