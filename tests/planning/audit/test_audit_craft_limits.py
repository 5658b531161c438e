"""A plan that breaks one limit of one spacecraft, by a second: the audit names that limit and nothing else."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from audit_bench import Bench

from passplan.planning.audit import Fault

CRAFT = "Ambril-3"


def audited(bench: Bench, **limits: float) -> list[Fault]:
    """The faults of the honest plan where its spacecraft have these limits."""
    craft = bench.run.spacecraft[CRAFT]
    run = replace(bench.run, spacecraft={**bench.run.spacecraft, CRAFT: craft.model_copy(update=limits)})
    return replace(bench, run=run).audit()


def spans_s(bench: Bench) -> list[tuple[float, float]]:
    """Start and end of the spacecraft's contacts [s]."""
    own = bench.contacts[bench.contacts["spacecraft"] == CRAFT]
    return [tuple((own[edge].iloc[k].to_datetime64() - bench.run.start_utc) / np.timedelta64(1, "s")
                  for edge in ("start_utc", "end_utc")) for k in range(len(own))]


@pytest.mark.parametrize(("key", "words"), [
    ("contact_gap_s", "s are needed"), ("cool_down_s", "contacts with sending")])
def test_too_little_rest(bench: Bench, key: str, words: str) -> None:
    least_s = min(b[0] - a[1] for a, b in pairwise(spans_s(bench)))
    assert audited(bench, **{key: least_s}) == []
    faults = audited(bench, **{key: least_s + 1.0})
    assert {fault.kind for fault in faults} == {key.removesuffix("_s")}
    assert words in faults[0].sentence


def test_a_contact_for_commands_needs_no_cooling(bench: Bench) -> None:
    own = bench.contacts.index[bench.contacts["spacecraft"] == CRAFT]
    bench.contacts.loc[own[1::2], "service"] = "command"
    assert "cool_down" not in {fault.kind for fault in audited(bench, cool_down_s=1_800.0)}
    assert "contact_gap" in {fault.kind for fault in audited(bench, contact_gap_s=86_400.0)}
