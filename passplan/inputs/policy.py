"""The house rules of one run: limits, worth, and how hard to look for a better plan."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from passplan.inputs.records import Record


class Growth(Record):
    """Along-track sigma of an orbit: ``at_epoch_km``, and ``per_day_km`` more for each day from it, either way."""

    at_epoch_km: Annotated[float, Field(ge=0.0, le=1_000.0)]
    per_day_km: Annotated[float, Field(ge=0.0, le=1_000.0)]


class Timing(Record):
    """How fast element sets of each orbit class go stale; ``ephemeris_km`` is the sigma of an operator's ephemeris.

    Common practice, no source: about 1 km at epoch for low orbits, growing by 1-3 km a day along track
    (more for the low perigee of eccentric ones, less where there is no drag).
    """

    low: Growth = Growth(at_epoch_km=1.0, per_day_km=2.0)
    medium: Growth = Growth(at_epoch_km=1.0, per_day_km=0.5)
    geosynchronous: Growth = Growth(at_epoch_km=2.0, per_day_km=1.0)
    eccentric: Growth = Growth(at_epoch_km=2.0, per_day_km=3.0)
    ephemeris_km: Annotated[float, Field(ge=0.0, le=1_000.0)] = 0.1


class Guarantee(Record):
    """What the spacecraft of one mission get together, in every span of ``days`` days of UTC within the horizon."""

    mission: Annotated[str, Field(min_length=1)]
    contacts: Annotated[int, Field(ge=1, le=100_000)] | None = None
    mb: Annotated[float, Field(gt=0.0, le=1e12)] | None = None
    days: Annotated[int, Field(ge=1, le=31)] = 1

    @model_validator(mode="after")
    def _consistent(self) -> Guarantee:
        if self.contacts is None and self.mb is None:
            raise ValueError("a guarantee needs contacts, mb or both; add one")
        return self


class Policy(Record):
    """Defaults are meant to be safe; a config states only what differs.

    Values are in "worth" units: a delivered MB earns its spacecraft's weight, a lost MB costs
    ``spill_cost_per_mb``, and a unit of money costs ``worth_per_money``. Rain, cloud and scintillation are
    counted from ``unavailability_percent`` on: the share of an average year in which the link may fail. With
    ``volume_basis = "expected"`` a contact is worth what its link brings down on average over such a year.
    """

    min_contact_s: Annotated[float, Field(ge=1.0, le=7_200.0)] = 120.0
    required_margin_db: Annotated[float, Field(ge=0.0, le=30.0)] = 3.0
    unavailability_percent: Annotated[float, Field(ge=0.001, le=50.0)] | None = None
    volume_basis: Literal["availability", "expected"] = "availability"
    sun_noise: bool = False
    ionospheric_allowance_db: Annotated[float, Field(ge=0.0, le=30.0)] = 0.0
    required_c_over_i_db: Annotated[float, Field(ge=-10.0, le=60.0)] | None = None
    command_every_h: Annotated[float, Field(gt=0.0, le=240.0)] | None = None
    command_min_s: Annotated[float, Field(ge=1.0, le=7_200.0)] = 120.0
    spill_cost_per_mb: Annotated[float, Field(ge=0.0, le=1e6)] = 0.1
    left_worth_share: Annotated[float, Field(ge=0.0, le=1.0)] = 0.0
    worth_per_money: Annotated[float, Field(ge=0.0, le=1e6)] = 0.0
    budget_per_day: Annotated[float, Field(ge=0.0, le=1e9)] | None = None
    tentative_closures: Literal["keep_free", "plan_through"] = "keep_free"
    guarantee: tuple[Guarantee, ...] = ()
    tiers: Literal["one_value", "in_order"] = "one_value"
    change_cost: Annotated[float, Field(ge=0.0, le=1e12)] = 0.0
    change_half_h: Annotated[float, Field(gt=0.0, le=240.0)] = 12.0
    fairness: Literal["off", "max_min"] = "off"
    when_rules_conflict: Literal["list", "stop"] = "list"
    freeze_h: Annotated[float, Field(gt=0.0, le=240.0)] | None = None
    element_warn_age_days: Annotated[float, Field(gt=0.0, le=3_650.0)] = 3.0
    element_refuse_age_days: Annotated[float, Field(gt=0.0, le=3_650.0)] = 14.0
    when_elements_fail: Literal["leave_out", "stop"] = "leave_out"
    refraction: Literal["off", "itu_p834"] = "off"
    off_pointing_beamwidths: Annotated[float, Field(gt=0.0, le=1.0)] = 0.25
    guard_sigmas: Annotated[float, Field(ge=0.0, le=10.0)] = 0.0
    timing: Timing = Timing()
    cut_grid_s: Annotated[int, Field(ge=0, le=3_600)] = 180
    options_per_window: Annotated[int, Field(ge=1, le=200)] = 12
    gap: Annotated[float, Field(ge=0.0, le=1.0)] = 0.005
    time_limit_s: Annotated[float, Field(gt=0.0, le=86_400.0)] = 60.0
    search_rounds: Annotated[int, Field(ge=0, le=1_000_000)] = 1_000_000
    threads: Annotated[int, Field(ge=1, le=256)] = 2
    seed: Annotated[int, Field(ge=0, le=2_147_483_647)] = 1

    @model_validator(mode="after")
    def _consistent(self) -> Policy:
        if self.volume_basis == "expected" and self.unavailability_percent is None:
            raise ValueError(
                'volume_basis "expected" needs unavailability_percent, at which modcods are chosen; state it')
        if self.element_warn_age_days > self.element_refuse_age_days:
            raise ValueError("element_warn_age_days is above element_refuse_age_days; lower it")
        return self
