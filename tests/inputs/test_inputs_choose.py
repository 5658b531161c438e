"""Which of several element sets is used, by the documented rules."""

from __future__ import annotations

import math

import pytest
from element_samples import END, START, made
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.inputs.elements.choose import choose, sgp4_fault, successive_jump_km
from passplan.inputs.elements.table import COLUMNS, elements_table


def uses(choice):
    return [candidate.use for candidate in choice.candidates]


def test_the_nearest_to_the_start_is_chosen_and_the_rest_listed():
    sets = [made(5.0), made(0.4), made(2.0)]
    choice = choose(sets, START, END, 14.0)
    assert choice.chosen is sets[1]
    assert uses(choice) == ["listed", "listed", "chosen"], "by epoch"
    assert choice.predecessor is sets[2]
    assert choice.reason == ""


def test_an_epoch_after_the_start_counts_by_its_distance_too():
    before, after = made(0.5), made(-0.25)
    assert choose([before, after], START, END, 14.0).chosen is after
    assert choose([made(0.125), after], START, END, 14.0).chosen is not after


def test_of_equally_near_ones_the_later_wins_in_any_order():
    before, after = made(0.25), made(-0.25)
    assert choose([before, after], START, END, 14.0).chosen is after
    assert choose([after, before], START, END, 14.0).chosen is after


def test_of_equal_epochs_the_higher_set_number_wins_then_the_first_read():
    old, new = made(element_set_number=7), made(element_set_number=8)
    assert choose([old, new], START, END, 14.0).chosen is new
    assert choose([new, old], START, END, 14.0).chosen is new
    first, second = made(), made()
    assert choose([first, second], START, END, 14.0).chosen is first


def test_newest_wins_in_a_drop_folder_up_to_the_end_of_the_horizon():
    sets = [made(0.125), made(-0.9), made(-1.5)]
    assert choose(sets, START, END, 14.0, rule="newest").chosen is sets[1]
    assert choose(sets, START, END, 14.0, rule="nearest").chosen is sets[0]
    assert choose(sets[2:], START, END, 14.0, rule="newest").chosen is sets[2], "better than none"


@pytest.mark.parametrize("age_days", [14.1, -14.1, 4_000.0])
def test_a_set_beyond_the_limit_is_too_old_or_too_new(age_days):
    choice = choose([made(age_days)], START, END, 14.0)
    assert choice.chosen is None
    assert uses(choice) == ["too old"]
    when = "before" if age_days > 0 else "after"
    lies = f"its epoch lies {abs(age_days):.1f} days {when} the start, the limit is 14 days"
    assert choice.reason == f"its only element set is too old: {lies}"


def test_the_limit_itself_is_allowed():
    assert choose([made(14.0)], START, END, 14.0).chosen is not None


def test_a_set_that_sgp4_refuses_is_not_usable():
    decayed = made(6.0, mean_motion_rev_per_day=16.4, bstar_per_earth_radius=0.03)
    assert sgp4_fault(decayed, decayed.epoch_utc, decayed.epoch_utc) is None
    assert "decayed" in str(sgp4_fault(decayed, decayed.epoch_utc, START))
    assert sgp4_fault(decayed, START, START) is None, "days later SGP4 answers again, with nonsense"
    good = made(9.0)
    choice = choose([decayed, good], START, END, 14.0)
    assert choice.chosen is good
    assert "SGP4 cannot use it" in choice.candidates[1].reason
    alone = choose([decayed], START, END, 14.0)
    assert "unusable" in alone.reason


def test_a_set_inside_the_earth_is_not_usable():
    choice = choose([made(mean_motion_rev_per_day=18.5)], START, END, 14.0)
    assert uses(choice) == ["unusable"]


def test_nothing_to_choose_from():
    choice = choose([], START, END, 14.0)
    assert (choice.chosen, choice.candidates, choice.predecessor) == (None, (), None)
    assert choice.reason == "no element set of it was found"


def test_several_unusable_sets_name_the_nearest():
    choice = choose([made(30.0), made(20.0)], START, END, 14.0)
    assert "none of its 2 element sets is usable; the nearest is too old: its epoch lies 20.0 days" in choice.reason


def test_the_jump_of_a_set_against_itself_is_nothing():
    assert successive_jump_km(made(), made()) < 1e-6


def test_the_jump_along_track_is_the_arc():
    # 0.1 deg along a near-circular orbit of about 6 880 km radius: 12 km.
    older, newer = made(), made(mean_anomaly_deg=272.3456 + 0.1)
    assert successive_jump_km(older, newer) == pytest.approx(math.radians(0.1) * 6_880.0, rel=0.02)


def test_the_jump_of_a_set_that_fails_is_unknown():
    assert math.isnan(successive_jump_km(made(mean_motion_rev_per_day=18.5), made()))


@settings(deadline=None, max_examples=100)
@given(
    ages=st.lists(st.integers(-20_000, 20_000).map(lambda n: n / 1_000), max_size=8),
    limit=st.integers(1, 20),
    rule=st.sampled_from(["nearest", "newest"]),
    data=st.data(),
)
def test_the_choice_is_usable_whole_and_does_not_hang_on_the_order(ages, limit, rule, data):
    sets = [made(age) for age in ages]
    choice = choose(sets, START, END, float(limit), rule=rule)
    assert len(choice.candidates) == len(sets), "nothing is lost"
    usable = [one for one in sets if abs(one.age_days(START)) <= limit]
    assert (choice.chosen is None) == (not usable)
    if choice.chosen is None:
        return
    assert choice.chosen in usable
    if rule == "nearest":
        assert abs(choice.chosen.age_days(START)) == min(abs(one.age_days(START)) for one in usable)
    again = choose(data.draw(st.permutations(sets)), START, END, float(limit), rule=rule)
    assert again.chosen is not None
    assert again.chosen.epoch_utc == choice.chosen.epoch_utc


def test_an_empty_table_has_its_columns_and_types():
    frame = elements_table([])
    assert tuple(frame.columns) == COLUMNS
    assert str(frame["catalogue_number"].dtype) == "Int64"
    assert str(frame["epoch_utc"].dtype) == "datetime64[ms]"
    assert str(frame["age_days"].dtype) == "float64"
