from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.inputs.fleet import Spacecraft
from passplan.planning.audit.rows import Piece
from passplan.planning.audit.storage import follow


def _craft(generation: float, capacity: float, start: float) -> Spacecraft:
    return Spacecraft(
        name="Plover", catalogue_number=1, generation_mb_per_s=generation, storage_mb=capacity, start_fill_mb=start
    )


def _piece(start_s: float, end_s: float, rate_mb_per_s: float) -> Piece:
    return Piece(start_s, end_s, "QPSK 1/2", rate_mb_per_s * 8.0, 0.0)


def test_by_hand() -> None:
    # 2 MB/s in, 100 MB of room, 40 aboard: full after 30 s, 40 MB lost by 50 s. Sending 12 MB/s from 50 s runs
    # dry after 10 s (120 MB sent), then sends as it generates: 10 s more, 20 MB. Then 30 s fill 60 MB.
    balance = follow(_craft(2.0, 100.0, 40.0), [_piece(50.0, 70.0, 12.0)], 100.0)
    assert balance.sent_mb == pytest.approx((140.0,))
    assert (balance.lost_mb, balance.left_mb) == pytest.approx((40.0, 60.0))
    assert balance.generated_mb == 200.0


def test_sending_slower_than_generating_still_spills() -> None:
    balance = follow(_craft(3.0, 10.0, 10.0), [_piece(0.0, 10.0, 1.0)], 10.0)
    assert balance.sent_mb == pytest.approx((10.0,))
    assert balance.lost_mb == pytest.approx(20.0)


def test_no_storage_at_all_passes_data_straight_through() -> None:
    balance = follow(_craft(3.0, 0.0, 0.0), [_piece(10.0, 20.0, 5.0)], 30.0)
    assert balance.sent_mb == pytest.approx((30.0,))
    assert balance.lost_mb == pytest.approx(60.0)


def test_nothing_generated_and_nothing_sent() -> None:
    balance = follow(_craft(0.0, 10.0, 4.0), [], 100.0)
    assert (balance.delivered_mb, balance.lost_mb, balance.left_mb) == (0.0, 0.0, 4.0)


@settings(deadline=None, max_examples=100)
@given(
    st.floats(0.0, 5.0), st.floats(0.0, 200.0), st.floats(0.0, 1.0),
    st.lists(st.tuples(st.integers(0, 30), st.integers(1, 30), st.floats(0.1, 20.0)), max_size=5),
)
def test_balances_and_agrees_with_small_steps(
    generation: float, capacity: float, share: float, gaps: list[tuple[int, int, float]]
) -> None:
    pieces, clock = [], 0
    for gap, length, rate in gaps:
        pieces.append(_piece(clock + gap, clock + gap + length, rate))
        clock += gap + length
    horizon = clock + 20
    craft = _craft(generation, capacity, capacity * share)
    balance = follow(craft, pieces, horizon)
    out = balance.delivered_mb + balance.lost_mb + balance.left_mb
    assert balance.start_mb + balance.generated_mb == pytest.approx(out, abs=1e-9 * (1.0 + out))
    assert -1e-9 <= balance.left_mb <= capacity + 1e-9

    step, fill, delivered = 0.01, craft.start_fill_mb, 0.0
    for tick in range(round(horizon / step)):
        rate = next((p.rate_mbps / 8.0 for p in pieces if p.start_s <= (tick + 0.5) * step < p.end_s), 0.0)
        sent = min(fill + generation * step, rate * step)
        delivered += sent
        fill = min(fill + generation * step - sent, capacity)
    # Each step rounds to at most what one step can generate; the storage may be full or dry between steps.
    assert delivered == pytest.approx(balance.delivered_mb, abs=0.05 * (1 + len(pieces)) * (1.0 + generation))
    assert fill == pytest.approx(balance.left_mb, abs=0.05 * (1 + len(pieces)) * (1.0 + generation))
