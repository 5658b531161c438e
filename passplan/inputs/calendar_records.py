"""Closures of antennas and contacts that somebody asked for."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from passplan.inputs.records import Instant, Label, Record

# Beside the services of a contact: ``ranging`` wants one that both sends and receives, on an antenna that offers it.
RequestedService = Literal["downlink", "command", "both", "ranging"]


class Closure(Record):
    """A half-open interval in which an antenna cannot be used.

    An ``outage``, another party's ``booking``, or a ``wind_stow``: stowed because of the wind. Whether a ``tentative``
    one is kept free is the policy's to say.
    """

    antenna: str
    start_utc: Instant
    end_utc: Instant
    kind: Literal["outage", "booking", "wind_stow"] = "outage"
    tentative: bool = False
    note: str = ""

    @model_validator(mode="after")
    def _consistent(self) -> Closure:
        if self.start_utc >= self.end_utc:
            raise ValueError("end_utc is not after start_utc; swap or correct them")
        return self


class Request(Record):
    """One contact that somebody asked for, anywhere in a span of time.

    It is met by a planned contact of the spacecraft that offers ``service``, lies within the span and
    lasts at least ``min_duration_s``; ``antenna`` or ``site`` narrow it further. A ``fixed`` one runs from
    ``earliest_utc`` to ``latest_utc`` exactly, to the whole seconds within. ``points`` is what missing it weighs. With
    ``standby`` it counts only if a second antenna, which could follow all the time and offers the service too, is held
    beside it. With ``handover_overlap_s`` contacts follow the spacecraft from ``earliest_utc`` to ``latest_utc``
    without a break: each begins so long before the one before it ends.
    """

    name: Label
    spacecraft: str
    antenna: str | None = None
    site: str | None = None
    service: RequestedService = "downlink"
    earliest_utc: Instant
    latest_utc: Instant
    min_duration_s: Annotated[float, Field(ge=1.0, le=86_400.0)] = 120.0
    fixed: bool = False
    points: Annotated[float, Field(gt=0.0, le=10.0)] = 1.0
    standby: bool = False
    handover_overlap_s: Annotated[int, Field(ge=1, le=3_600)] | None = None

    @model_validator(mode="after")
    def _consistent(self) -> Request:
        span_s = (self.latest_utc - self.earliest_utc).total_seconds()
        if span_s <= 0.0:
            raise ValueError("latest_utc is not after earliest_utc; swap or correct them")
        if span_s < self.min_duration_s:
            least_s = self.min_duration_s
            raise ValueError(f"the span of {span_s:g} s is shorter than min_duration_s {least_s:g}; widen it")
        if self.handover_overlap_s is not None:
            for key in ("antenna", "fixed", "standby"):
                if getattr(self, key):
                    raise ValueError(f"handover_overlap_s wants several contacts on several antennas; drop {key}")
            if span_s <= self.handover_overlap_s:
                overlap_s = self.handover_overlap_s
                raise ValueError(f"the span of {span_s:g} s is no longer than handover_overlap_s {overlap_s}; widen it")
        return self
