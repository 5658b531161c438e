"""The house rules of one run: limits, worth, and how hard to look for a better plan."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from passplan.inputs.records import Record


class Policy(Record):
    """Defaults are meant to be safe; a config states only what differs.

    Values are in "worth" units: a delivered MB earns its spacecraft's weight, a lost MB costs
    ``spill_cost_per_mb``, and a unit of money costs ``worth_per_money``. Rain, cloud and scintillation are
    counted from ``unavailability_percent`` on: the share of an average year in which the link may fail.
    """

    min_contact_s: Annotated[float, Field(ge=1.0, le=7_200.0)] = 120.0
    required_margin_db: Annotated[float, Field(ge=0.0, le=30.0)] = 3.0
    unavailability_percent: Annotated[float, Field(ge=0.001, le=50.0)] | None = None
    sun_noise: bool = False
    ionospheric_allowance_db: Annotated[float, Field(ge=0.0, le=30.0)] = 0.0
    required_c_over_i_db: Annotated[float, Field(ge=-10.0, le=60.0)] | None = None
    command_every_h: Annotated[float, Field(gt=0.0, le=240.0)] | None = None
    command_min_s: Annotated[float, Field(ge=1.0, le=7_200.0)] = 120.0
    spill_cost_per_mb: Annotated[float, Field(ge=0.0, le=1e6)] = 0.1
    worth_per_money: Annotated[float, Field(ge=0.0, le=1e6)] = 0.0
    element_warn_age_days: Annotated[float, Field(gt=0.0, le=3_650.0)] = 3.0
    element_refuse_age_days: Annotated[float, Field(gt=0.0, le=3_650.0)] = 14.0
    when_elements_fail: Literal["leave_out", "stop"] = "leave_out"
    cut_grid_s: Annotated[int, Field(ge=0, le=3_600)] = 180
    options_per_window: Annotated[int, Field(ge=1, le=200)] = 12
    gap: Annotated[float, Field(ge=0.0, le=1.0)] = 0.005
    time_limit_s: Annotated[float, Field(gt=0.0, le=86_400.0)] = 60.0
    threads: Annotated[int, Field(ge=1, le=256)] = 2
    seed: Annotated[int, Field(ge=0, le=2_147_483_647)] = 1

    @model_validator(mode="after")
    def _consistent(self) -> Policy:
        if self.element_warn_age_days > self.element_refuse_age_days:
            raise ValueError("element_warn_age_days is above element_refuse_age_days; lower it")
        return self
