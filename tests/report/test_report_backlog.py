"""Storage through the day as it is drawn: blocks in the terminal, a path on the page."""

from __future__ import annotations

import numpy as np
import pandas as pd

from passplan.planning.backlog import Backlog
from passplan.report.backlog_chart import LOST, blocks
from passplan.report.page.axis import Day
from passplan.report.page.lanes import storage_path


def test_blocks_show_the_highest_fill_of_a_cell_and_losses() -> None:
    store = Backlog(np.array([0.0, 50.0, 50.0, 100.0]), np.array([0.0, 80.0, 10.0, 10.0]), 80.0, ((90.0, 100.0),))
    assert blocks(store, 4).plain == f"▄█▁{LOST}" or blocks(store, 4).plain == f"▄██{LOST}"


def test_a_storage_path_closes_on_the_ground() -> None:
    store = Backlog(np.array([0.0, 500.0, 1000.0]), np.array([0.0, 50.0, 100.0]), 100.0, ((900.0, 1000.0),))
    (band,) = Day(pd.Timestamp("2027-03-09"), 1000.0).bands()
    area, lost = storage_path(store, band)
    assert area == "M0 100L0 100L50 50L100 0L100 100Z"
    assert lost == "M90 0H100V16H90Z"
