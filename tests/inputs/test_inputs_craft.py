"""The sample's limits of spacecraft: every key is in use, and CSV carries them."""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path

from passplan.inputs.craft_limits import CraftLimits
from passplan.inputs.craft_power import CraftPower
from passplan.inputs.fleet import DownlinkRadio
from passplan.inputs.load import load_run

ROOT = Path(__file__).parents[2]


def test_the_sample_uses_every_limit_of_a_spacecraft() -> None:
    run = load_run(ROOT / "configs" / "rules.toml")
    for key, field in {**CraftLimits.model_fields, **CraftPower.model_fields}.items():
        assert any(getattr(craft, key) != field.default for craft in run.spacecraft.values()), key
    assert all(radio.load_w > 0 for radio in run.radios.values() if isinstance(radio, DownlinkRadio))
    assert {slot.kind for slot in run.slots} == {"imaging", "attitude"}
    assert {contact.spacecraft for contact in run.loaded} == {"Ambril-5"}
    assert run.warnings == ()


def test_limits_are_off_where_nothing_is_said() -> None:
    run = load_run(ROOT / "configs" / "daily.toml")
    for key, field in {**CraftLimits.model_fields, **CraftPower.model_fields}.items():
        assert all(getattr(craft, key) == field.default for craft in run.spacecraft.values()), key
    assert run.slots == () and run.loaded == ()


def test_slots_and_loaded_contacts_of_other_days_are_left_out() -> None:
    run = load_run(ROOT / "configs" / "rules.toml", start=datetime(2027, 3, 10, tzinfo=UTC))
    assert run.slots == () and run.loaded == ()
