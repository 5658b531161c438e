"""How data aboard ages: a deadline to be delivered by, worth that falls with age, and how old the start fill is."""

from __future__ import annotations

from itertools import pairwise
from typing import Annotated, Any

from pydantic import BeforeValidator, Field, model_validator

from passplan.inputs.records import Record

_Hours = Annotated[float, Field(ge=0.0, le=744.0)]
_Point = tuple[_Hours, Annotated[float, Field(ge=0.0, le=1.0)]]


def _points(value: Any) -> Any:
    """A CSV cell holds the curve as ``0:1;6:0.5``, the age in hours first."""
    if isinstance(value, str):
        try:
            return tuple(tuple(float(x) for x in point.split(":", 1)) for point in value.split(";") if point.strip())
        except ValueError:
            raise ValueError("write the curve as age:share pairs, ages in hours, as 0:1;6:0.5") from None
    return value


class Ageing(Record):
    """Keys on the age of data, of a spacecraft or of one of its data classes; all off where the user is silent.

    Data older than ``deadline_h`` is dropped aboard. ``freshness`` are (age in hours, share of the weight) points
    joined by straight lines, two at one age being a step; the last share holds on. ``start_age_h`` is the age of the
    oldest of the start fill, which was acquired evenly since.
    """

    deadline_h: Annotated[float, Field(gt=0.0, le=744.0)] | None = None
    freshness: Annotated[tuple[_Point, ...], BeforeValidator(_points)] = ()
    start_age_h: _Hours | None = None

    @model_validator(mode="after")
    def _ages_make_sense(self) -> Ageing:
        if self.freshness and self.freshness[0][0] != 0.0:
            raise ValueError("freshness starts at age 0; add the share that fresh data is worth, as 0:1")
        for k, ((age, share), (later, less)) in enumerate(pairwise(self.freshness)):
            if later < age or less > share or (k == 0 and later == 0.0):
                raise ValueError("in freshness ages rise and shares fall; sort or correct the points")
        if self.deadline_h is not None and (self.start_age_h or 0.0) > self.deadline_h:
            raise ValueError(
                f"start_age_h {self.start_age_h:g} is above deadline_h {self.deadline_h:g}; such data is gone already")
        return self
