"""Tiers and lists of a plan as text, however many there are."""

from __future__ import annotations

from passplan.report.standing import standing_lists, tier_lines


def test_any_number_of_tiers_with_value_bound_and_gap() -> None:
    tiers = [
        {"name": name, "sense": "most" if name == "value" else "least", "value": value, "bound": bound, "gap": gap}
        for name, value, bound, gap in (
            ("requirements", 0, 0.0, 0.0), ("overflow and deadlines", 28.04, 11.5, 0.59), ("value", 7e5, 7.1e5, 0.0141),
            ("cost", 12.0, None, None), ("changes", 3, 0, 1e9),
        )
    ]
    lines = tier_lines({"tiers": tiers})
    assert [line.name for line in lines] == [tier["name"] for tier in tiers]
    assert (lines[1].value, lines[1].bound, lines[1].gap) == ("28.0", "11.5", "59.00 %")
    assert (lines[2].sense, lines[2].value) == ("most", "700,000")
    assert (lines[3].bound, lines[3].gap, lines[4].gap) == ("", "none", "over 1000 %")
    assert tier_lines({}) == []


def test_lists_speak_in_their_own_words_or_by_their_fields() -> None:
    summary = {
        "to_ask": [{"name": "Orrin-A", "sentence": "09:10 to 09:20 UTC, ask before 06:00 UTC"}, "Ellery-B at 12:00"],
        "pins": [{"spacecraft": "Ambril-1", "earliest_utc": "2027-03-09T08:00:00Z", "antenna": None}],
        "frozen": [],
    }
    assert standing_lists(summary) == [
        ("Bookings still to ask for", ["Orrin-A: 09:10 to 09:20 UTC, ask before 06:00 UTC", "Ellery-B at 12:00"]),
        ("Pinned and forbidden", ["spacecraft Ambril-1, earliest 2027-03-09T08:00:00Z"]),
    ]
    assert standing_lists({}) == []
