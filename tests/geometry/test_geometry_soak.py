"""Long runs, left out by default: many random pairs against dense sampling. ``pytest -m slow``."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from test_geometry_windows import RANDOM_ORBIT, RANDOM_SITE, check_random_pair

pytestmark = pytest.mark.slow


@settings(deadline=None, max_examples=500)
@given(RANDOM_ORBIT, RANDOM_SITE, st.sampled_from([-2.0, 0.0, 5.0, 30.0, 60.0, 80.0]))
def test_500_random_pairs(source, site, mask_deg) -> None:  # type: ignore[no-untyped-def]
    check_random_pair(source, site, mask_deg)
