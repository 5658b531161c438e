"""Use of the antennas, causes of unused windows, parts of a plan, and tracks against the contacts table."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from passplan.inputs.errors import InputError
from passplan.inputs.run import Run
from passplan.planning.record import PlanRecord
from passplan.planning.unused import REASONS
from passplan.report.selection import Selection, select
from passplan.report.tracks import thinned, window_tracks
from passplan.report.usage import REASON_WORDS, antenna_use, causes, lost_causes, reason_words
from passplan.report.words import rate


def test_hours_of_an_antenna(short_plan: PlanRecord) -> None:
    for use in antenna_use(short_plan):
        own = short_plan.windows[short_plan.windows["antenna"] == use.antenna]
        longest = own["duration_s"].max() / 3600.0
        assert longest - 1e-6 <= use.seen_h <= min(24.0, own["duration_s"].sum() / 3600.0) + 1e-6
        assert 0.0 <= use.contact_h <= use.seen_h + 1e-6
    closed = {use.antenna: use.closed_h for use in antenna_use(short_plan)}
    assert closed["Ellery-A"] == pytest.approx(4.5)


def test_causes_add_up_to_the_unused_windows(short_plan: PlanRecord, short_run: Run) -> None:
    tracks = window_tracks(short_run, short_plan.windows)
    found = causes(short_plan, tracks)
    assert sum(cause.windows for cause in found) == len(short_plan.unused)
    capacity = [cause.could_carry_mb for cause in found]
    assert capacity == sorted(capacity, reverse=True)
    assert all(np.isfinite(capacity))
    assert all(np.isnan(cause.could_carry_mb) for cause in causes(short_plan))


def test_causes_of_lost_value_add_up_over_the_fleet_and_over_a_part(short_plan: PlanRecord) -> None:
    for summary in (short_plan.summary, select(short_plan, Selection(spacecraft="Ambril-2")).summary):
        found, stores = lost_causes(summary), summary["storage"].values()
        assert sum(one.lost_mb for one in found) == pytest.approx(sum(s["lost_mb"] for s in stores), abs=1e-9)
        assert sum(one.left_mb for one in found) == pytest.approx(sum(s["left_mb"] for s in stores), rel=1e-12)
        values = [one.lost_value for one in found]
        assert values == sorted(values, reverse=True)
        assert {one.cause for one in found} <= set(REASON_WORDS)
    older = {key: entry for key, entry in short_plan.summary.items() if key != "lost_value"}
    assert lost_causes(older) == []


def test_every_reason_has_words() -> None:
    assert set(REASONS) <= set(REASON_WORDS)
    assert reason_words("some_new_rule") == "some new rule"


def test_links_of_the_tracks_allow_what_the_contacts_send(short_plan: PlanRecord, short_run: Run) -> None:
    tracks = dict(zip(short_plan.windows["window_id"], window_tracks(short_run, short_plan.windows), strict=True))
    window_of = short_plan.contacts.set_index("contact_id")["window_id"]
    start = pd.Timestamp(short_run.start_utc)
    for piece in short_plan.segments.itertuples():
        track = tracks[window_of[piece.contact_id]]
        middle = ((piece.start_utc - start) + (piece.end_utc - piece.start_utc) / 2).total_seconds()
        allowed = track.rate_mbps[np.searchsorted(track.time_s, middle) - 1]
        assert allowed >= piece.rate_mbps - 1e-6


def test_the_margin_of_stepped_contacts_is_that_of_the_modcod_in_force(short_plan: PlanRecord, short_run: Run) -> None:
    tracks = dict(zip(short_plan.windows["window_id"], window_tracks(short_run, short_plan.windows), strict=True))
    stepped = short_plan.contacts[short_plan.contacts["modcod"] == "stepped"]
    assert len(stepped)
    start = pd.Timestamp(short_run.start_utc)
    for row in stepped.to_dict("records"):
        own = short_plan.segments[short_plan.segments["contact_id"] == row["contact_id"]]
        starts, ends = ((own[key] - start).dt.total_seconds() for key in ("start_utc", "end_utc"))
        track = tracks[row["window_id"]]
        pieces = list(zip(starts, ends, own["modcod"], strict=True))
        line = track.margin_in_force(row["radio"], pieces, track.time_s)
        assert line is not None
        times, margins = line
        assert (np.diff(times) >= 0.0).all()
        assert (times[0], times[-1]) == (track.time_s[0], track.time_s[-1])
        inside = (times >= starts.min()) & (times <= ends.max())
        assert margins[inside].min() == pytest.approx(row["min_margin_db"], abs=1e-6)


def test_a_selection_narrows_every_table(short_plan: PlanRecord) -> None:
    part = select(short_plan, Selection(site="Isvarde", spacecraft="Ambril-1"))
    assert set(part.contacts["spacecraft"]) == {"Ambril-1"}
    assert set(part.contacts["site"]) == {"Isvarde"}
    assert set(part.segments["contact_id"]) <= set(part.contacts["contact_id"])
    assert set(part.summary["antennas"]) == {"Isvarde-A", "Isvarde-B"}
    assert set(part.summary["storage"]) == {"Ambril-1"}
    assert len(part.unused) + part.contacts["window_id"].nunique() == len(part.windows)
    assert not Selection()


def test_an_unknown_name_names_the_nearest(short_plan: PlanRecord) -> None:
    with pytest.raises(InputError, match="did you mean 'Isvarde'"):
        select(short_plan, Selection(site="Isvarda"))


def test_thinning_keeps_the_ends() -> None:
    assert thinned(5, 10).tolist() == [0, 1, 2, 3, 4]
    assert thinned(1000, 3).tolist()[0] == 0
    assert thinned(1000, 3).tolist()[-1] == 999
    assert len(thinned(1000, 3)) == 3


@pytest.mark.parametrize(
    ("mbps", "text"), [(0.0021, "2.1 kbit/s"), (4.4499, "4.45 Mbit/s"), (142.3, "142 Mbit/s"), (2500.0, "2.5 Gbit/s")]
)
def test_rates(mbps: float, text: str) -> None:
    assert rate(mbps) == text
