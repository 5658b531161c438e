"""How much contact a spacecraft stands: keys of the fleet's spacecraft, all off where the user is silent."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field

from passplan.inputs.records import Record

_Seconds = Annotated[float, Field(ge=0.0, le=86_400.0)]


class CraftLimits(Record):
    """Limits on a spacecraft's own contacts.

    ``contact_gap_s`` lies free between any two of them, ``cool_down_s`` between the end of one in which it sends
    and the start of the next in which it sends.
    """

    contact_gap_s: _Seconds = 0.0
    cool_down_s: _Seconds = 0.0
