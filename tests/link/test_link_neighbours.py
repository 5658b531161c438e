"""What the rest of the fleet leaves of a link: lines of the budget that add up as a pocket calculator adds."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from sisters import orbit, sisters, windows_of

from passplan.link.lines import budget_lines, link_along

TRAIN = {f"Teal-{k}": orbit(70.0 + 0.1 * k) for k in range(8)}


def test_the_budget_adds_up_everybody_that_is_up() -> None:
    run = sisters(TRAIN, required_c_over_i_db=15.0)
    window = windows_of(run).query("spacecraft == 'Teal-3'").iloc[0]
    at = np.datetime64(window["peak_utc"], "ms")
    terms = {line.term: line for line in budget_lines(run, "Teal-3", "Dish", at)}
    alone = [line for name, line in terms.items() if name.startswith("  C/I, Teal")]
    # The five worst by name, the worst first; the other two together.
    assert [float(line.value) for line in alone] == sorted(float(line.value) for line in alone)
    assert len(alone) == 5
    each_db = [*(float(line.value) for line in alone), float(terms["  C/I, 2 more"].value)]
    total_db = -10.0 * np.log10(sum(10.0 ** (-value / 10.0) for value in each_db))
    assert float(terms["C/I, if all send"].value) == pytest.approx(total_db, abs=1e-9)
    assert "15 dB" in terms["C/I, if all send"].source
    es_n0 = float(terms["Es/N0"].value)
    both_db = -10.0 * np.log10(10.0 ** (-es_n0 / 10.0) + 10.0 ** (-total_db / 10.0))
    assert float(terms["Es/(N0+I0), if all send"].value) == pytest.approx(both_db, abs=1e-9)
    lost_db = es_n0 - both_db
    assert lost_db > 0.5
    left_db = float(terms["margin"].value) - float(terms["margin, if all send"].value)
    assert left_db == pytest.approx(lost_db, abs=1e-9)
    along = link_along(run, "Teal-3", "Dish", np.array([at]))
    assert along["c_over_i_db"].to_numpy() == pytest.approx([total_db])


def test_a_lonely_link_and_an_unknown_beam_say_so() -> None:
    run = sisters({"Teal": orbit(70.0), "Far": orbit(250.0)})
    window = windows_of(run).query("spacecraft == 'Teal'").iloc[0]
    at = np.datetime64(window["peak_utc"], "ms")
    terms = {line.term: line for line in budget_lines(run, "Teal", "Dish", at)}
    assert terms["C/I"].value == "none"
    assert "margin, if all send" not in terms
    assert link_along(run, "Teal", "Dish", np.array([at]))["c_over_i_db"].isna().all()
    deaf = run.receivers["rx"].model_copy(update={
        "gain_dbi": None, "noise_temperature_k": None, "g_over_t_db_per_k": 29.3})
    unknown = {line.term: line for line in budget_lines(replace(run, receivers={"rx": deaf}), "Teal", "Dish", at)}
    assert unknown["C/I"].value == "unknown"
    single = sisters({"Teal": orbit(70.0)})
    assert not any("C/I" in line.term for line in budget_lines(single, "Teal", "Dish", at))
