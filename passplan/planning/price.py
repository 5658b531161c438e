"""What a contact costs."""

from __future__ import annotations

from passplan.inputs.ground import Antenna


def price_of(antenna: Antenna, duration_s: int) -> float:
    """Money for a contact of ``duration_s`` on an antenna: by the contact and the minute, no less than the minimum."""
    step_s = antenna.billed_s
    billed_s = duration_s if step_s is None else -(-duration_s // step_s) * step_s
    return max(antenna.minimum_charge, antenna.price_per_contact + antenna.price_per_minute * billed_s / 60.0)
