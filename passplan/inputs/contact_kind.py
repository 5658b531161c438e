"""Which contacts a rule of the ground network means: by band and by service."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field, model_validator

from passplan.inputs.records import Record, Service

_Frequency = Annotated[float, Field(ge=100.0, le=50_000.0)]


class ContactKind(Record):
    """Contacts that offer ``service`` and have a carrier, up or down, from ``low_mhz`` to ``high_mhz``.

    What is absent narrows nothing. A contact that offers both is meant by each service.
    """

    low_mhz: _Frequency | None = None
    high_mhz: _Frequency | None = None
    service: Service | None = None

    @model_validator(mode="after")
    def _sound_band(self) -> ContactKind:
        if (self.low_mhz is None) != (self.high_mhz is None):
            raise ValueError("give both low_mhz and high_mhz, or neither")
        if self.low_mhz is not None and self.high_mhz is not None and self.low_mhz > self.high_mhz:
            raise ValueError(f"low_mhz {self.low_mhz:g} is above high_mhz {self.high_mhz:g}; swap them")
        return self
