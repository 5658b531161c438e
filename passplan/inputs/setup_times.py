"""Times to prepare and to release an antenna that differ by band and service."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field, model_validator

from passplan.inputs.contact_kind import ContactKind

_Seconds = Annotated[float, Field(ge=0.0, le=3_600.0)]


class SetupTime(ContactKind):
    """Other seconds before (``prepare_s``) and after (``release_s``) some of an antenna's contacts.

    What is not stated stays as the antenna has it.
    """

    prepare_s: _Seconds | None = None
    release_s: _Seconds | None = None

    @model_validator(mode="after")
    def _consistent(self) -> SetupTime:
        if self.low_mhz is None and self.service is None:
            raise ValueError("say which contacts are meant: give low_mhz and high_mhz, or service")
        if self.prepare_s is None and self.release_s is None:
            raise ValueError("give prepare_s or release_s, or remove this table")
        return self
