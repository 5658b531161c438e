"""What the user says of a spacecraft's battery, its panels and its base load."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field, model_validator

from passplan.inputs.records import Record

_Watts = Annotated[float, Field(ge=0.0, le=1e6)]
_Percent = Annotated[float, Field(ge=0.0, le=100.0)]
_KEYS = ("battery_floor_percent", "battery_start_percent", "solar_w", "base_load_w")


class CraftPower(Record):
    """The energy balance, off without ``battery_wh``.

    The panels give ``solar_w`` in sunlight and nothing in eclipse; the base load is drawn all the time, and each
    downlink radio's ``load_w`` while it is on. The state of charge, in percent of ``battery_wh``, starts the horizon
    at ``battery_start_percent``, stops at full, and never falls under ``battery_floor_percent``.
    """

    battery_wh: Annotated[float, Field(gt=0.0, le=1e7)] | None = None
    battery_floor_percent: _Percent = 0.0
    battery_start_percent: _Percent = 100.0
    solar_w: _Watts | None = None
    base_load_w: _Watts | None = None

    @model_validator(mode="after")
    def _whole_balance(self) -> CraftPower:
        if self.battery_wh is None:
            for key in _KEYS:
                if key in self.model_fields_set:
                    raise ValueError(f"{key} is given without battery_wh; add the battery's capacity, or drop it")
        elif self.solar_w is None or self.base_load_w is None:
            raise ValueError("battery_wh needs solar_w and base_load_w beside it; add them")
        return self
