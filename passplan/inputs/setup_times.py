"""Times to prepare and to release an antenna that differ by band and service."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field, model_validator

from passplan.inputs.records import Record, Service

_Frequency = Annotated[float, Field(ge=100.0, le=50_000.0)]
_Seconds = Annotated[float, Field(ge=0.0, le=3_600.0)]


class SetupTime(Record):
    """Other seconds before (``prepare_s``) and after (``release_s``) some of an antenna's contacts.

    Meant are contacts of the ``service`` (any where it is absent) with a carrier, up or down, from ``low_mhz``
    to ``high_mhz`` (any where they are absent). What is not stated stays as the antenna has it.
    """

    low_mhz: _Frequency | None = None
    high_mhz: _Frequency | None = None
    service: Service | None = None
    prepare_s: _Seconds | None = None
    release_s: _Seconds | None = None

    @model_validator(mode="after")
    def _consistent(self) -> SetupTime:
        if (self.low_mhz is None) != (self.high_mhz is None):
            raise ValueError("give both low_mhz and high_mhz, or neither")
        if self.low_mhz is not None and self.high_mhz is not None and self.low_mhz > self.high_mhz:
            raise ValueError(f"low_mhz {self.low_mhz:g} is above high_mhz {self.high_mhz:g}; swap them")
        if self.low_mhz is None and self.service is None:
            raise ValueError("say which contacts are meant: give low_mhz and high_mhz, or service")
        if self.prepare_s is None and self.release_s is None:
            raise ValueError("give prepare_s or release_s, or remove this table")
        return self
