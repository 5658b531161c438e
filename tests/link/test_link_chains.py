from __future__ import annotations

from itertools import pairwise

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from link_bench import COMMAND_RADIO, RECEIVER, TRANSMITTER, X_RADIO, network

from passplan.inputs.ground import Receiver
from passplan.inputs.modcods import Modcod, ModcodTable, builtin_table
from passplan.link.budget import cn0_dbhz, density_ratio_db
from passplan.link.chains import (
    best_receiver,
    best_transmitter,
    chains_between,
    usable_modcods,
)
from passplan.link.noise import reference_figure_db_per_k


def _receiver(name: str, **changes: object) -> Receiver:
    return RECEIVER.model_copy(update={"name": name, **changes})


def test_figure_of_merit_stated_or_built() -> None:
    built = _receiver("built", g_over_t_db_per_k=None, gain_dbi=50.0, noise_temperature_k=100.0)
    assert reference_figure_db_per_k(RECEIVER) == 32.0
    assert reference_figure_db_per_k(built) == pytest.approx(30.0)
    with pytest.raises(ValueError, match="'bare' states neither"):
        reference_figure_db_per_k(_receiver("bare", g_over_t_db_per_k=None))


def test_the_best_receiver_wins_after_losses_and_ties_go_by_name() -> None:
    strong, linear = _receiver("strong", g_over_t_db_per_k=33.0), _receiver("linear", g_over_t_db_per_k=35.0)
    linear = linear.model_copy(update={"polarisations": ("H",)})
    found = best_receiver(X_RADIO, [RECEIVER, linear, strong])
    assert found is not None
    assert (found[0].name, found[1]) == ("strong", 0.0)
    tie = best_receiver(X_RADIO, [_receiver("b"), _receiver("a")])
    assert tie is not None
    assert tie[0].name == "a"
    worn = best_receiver(X_RADIO, [strong.model_copy(update={"pointing_loss_db": 2.0}), RECEIVER])
    assert worn is not None
    assert worn[0].name == "rx"


def test_band_and_polarisation_decide_who_serves() -> None:
    assert best_receiver(X_RADIO, [_receiver("low", high_mhz=8_100.0)]) is None
    assert best_receiver(X_RADIO, [_receiver("left", polarisations=("LHCP",))]) is None
    edge = best_receiver(X_RADIO, [_receiver("edge", low_mhz=8_200.0)])
    assert edge is not None
    half = best_receiver(X_RADIO, [_receiver("linear", polarisations=("V",))])
    assert half is not None
    assert half[1] == pytest.approx(3.01, abs=0.01)
    deaf = COMMAND_RADIO.model_copy(update={"polarisation": "LHCP"})
    assert best_transmitter(deaf, [TRANSMITTER]) is None


def test_the_best_transmitter_wins() -> None:
    louder = TRANSMITTER.model_copy(update={"name": "louder", "eirp_dbw": 50.0})
    found = best_transmitter(COMMAND_RADIO, [TRANSMITTER, louder])
    assert found is not None
    assert found[0].name == "louder"


def test_a_chain_gathers_every_constant_term() -> None:
    downlink, command = chains_between(network(), "Plover", "Dish")
    # EIRP 15 - 0.5 pointing - 1.5 implementation + G/T 32 + 228.60 - 76.99 dBHz.
    expected = float(density_ratio_db(cn0_dbhz(15.0, 2.0, 32.0), 50e6))
    assert downlink.merit_db == pytest.approx(expected)
    assert (downlink.radio, downlink.partner, downlink.direction) == ("x", "rx", "downlink")
    # 48 - 2 + (-28) + 228.60 - 48.06 dBHz.
    assert command.merit_db == pytest.approx(float(density_ratio_db(cn0_dbhz(48.0, 2.0, -28.0), 64e3)))
    assert [rung.required_db for rung in command.rungs] == [9.6]


def test_a_receive_only_antenna_has_no_command_chain() -> None:
    chains = chains_between(network(transmitters=()), "Plover", "Dish")
    assert [chain.direction for chain in chains] == ["downlink"]


def test_only_the_radio_s_own_modcods_are_used() -> None:
    radio = X_RADIO.model_copy(update={"modcods": ("QPSK 1/2", "8PSK 2/3")})
    assert [row.name for row in usable_modcods(radio, builtin_table("dvb-s2"))] == ["8PSK 2/3", "QPSK 1/2"]


def test_modcods_that_need_more_for_less_are_left_out() -> None:
    names = [row.name for row in usable_modcods(X_RADIO, builtin_table("dvb-s2"))]
    # 8PSK 3/5 carries more than QPSK 8/9 and needs less (ETSI EN 302 307-1, Table 13).
    assert "QPSK 8/9" not in names
    assert "8PSK 3/5" in names


@settings(deadline=None, max_examples=100)
@given(st.lists(st.tuples(st.floats(0.1, 6.0), st.floats(-3.0, 20.0)), min_size=1, max_size=12), st.floats(-5.0, 25.0))
def test_leaving_out_never_costs_rate(rows: list[tuple[float, float]], quality_db: float) -> None:
    table = ModcodTable("t", tuple(Modcod(f"m{i}", *row) for i, row in enumerate(rows)), "test")
    kept = usable_modcods(X_RADIO, table)

    def best(candidates: tuple[Modcod, ...]) -> float:
        held = [m.efficiency_bit_per_symbol for m in candidates if m.required_esn0_db <= quality_db]
        return max(held, default=0.0)

    assert best(kept) == best(table.rows)
    assert all(a.efficiency_bit_per_symbol > b.efficiency_bit_per_symbol for a, b in pairwise(kept))
    assert all(a.required_esn0_db > b.required_esn0_db for a, b in pairwise(kept))
