"""The plan as tables for the floors above: contacts, segments and unused windows."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
import pandas as pd

from passplan.inputs.run import Run
from passplan.planning.occupancy import Occupancy
from passplan.planning.options import Candidate, OptionSet
from passplan.planning.problem import Problem
from passplan.planning.result import PlanResult
from passplan.planning.rules import all_terms
from passplan.planning.value import account

CONTACT_COLUMNS = (
    "contact_id", "window_id", "spacecraft", "antenna", "site", "service", "radio", "frequency_mhz",
    "polarisation", "start_utc", "end_utc", "duration_s", "usable_s", "modcod", "volume_mb", "min_margin_db",
    "peak_elevation_deg", "weight", "value", "cost", "origin", "change", "cut")
SEGMENT_COLUMNS = ("contact_id", "start_utc", "end_utc", "modcod", "rate_mbps", "data_class", "volume_mb")
UNUSED_COLUMNS = ("window_id", "spacecraft", "antenna", "aos_utc", "los_utc", "reason", "detail")
