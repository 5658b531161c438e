"""How much contact a spacecraft stands: keys of the fleet's spacecraft, all off where the user is silent."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field, model_validator

from passplan.inputs.records import Record

_Seconds = Annotated[float, Field(ge=0.0, le=86_400.0)]


_Count = Annotated[int, Field(ge=1, le=1_000)]


class CraftLimits(Record):
    """Limits on a spacecraft's own contacts.

    It can be in as many as it has ``links`` at the same time, each on an antenna of its own. On each link
    ``contact_gap_s`` lies free between any two of them, ``cool_down_s`` between the end of one in which it sends and
    the start of the next in which it sends. An orbit runs from one ascending node to the next, a day is a day of UTC,
    and a contact counts where it starts. The transmitter is on from its acquisition to the end of sending: at most
    ``sending_per_contact_s`` in one contact, ``sending_per_orbit_s`` in one orbit, and ``sending_per_span_s`` in any
    ``sending_span_h`` hours; the seconds of several links add up.
    """

    links: Annotated[int, Field(ge=1, le=8)] = 1
    contact_gap_s: _Seconds = 0.0
    cool_down_s: _Seconds = 0.0
    contacts_per_orbit: _Count | None = None
    contacts_per_day: _Count | None = None
    sending_per_contact_s: _Seconds | None = None
    sending_per_orbit_s: _Seconds | None = None
    sending_per_span_s: Annotated[float, Field(ge=0.0, le=2_678_400.0)] | None = None
    sending_span_h: Annotated[float, Field(gt=0.0, le=744.0)] = 24.0

    @model_validator(mode="after")
    def _sensible_span(self) -> CraftLimits:
        if self.sending_per_span_s is None and "sending_span_h" in self.model_fields_set:
            raise ValueError("sending_span_h is given without sending_per_span_s; add the seconds, or drop it")
        return self

    @property
    def counts_sending(self) -> bool:
        """Whether some limit depends on when the transmitter is on."""
        return self.sending_per_orbit_s is not None or self.sending_per_span_s is not None
