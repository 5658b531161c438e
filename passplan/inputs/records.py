"""The base of every checked record, and the small types that several of them share."""

from __future__ import annotations

from datetime import UTC, date, datetime
from itertools import pairwise
from typing import Annotated, Any, Literal

import numpy as np
from pydantic import BaseModel, BeforeValidator, ConfigDict, Field

Polarisation = Literal["RHCP", "LHCP", "H", "V"]
Service = Literal["downlink", "command", "both"]


class Record(BaseModel):
    """A record the user wrote: frozen, no unknown keys, no infinities or NaN."""

    model_config = ConfigDict(extra="forbid", frozen=True, allow_inf_nan=False, str_strip_whitespace=True)


def parse_instant(value: Any) -> datetime:
    """An instant in UTC from text or a datetime; raises ValueError where the zone or the form is missing."""
    if isinstance(value, str):
        try:
            value = datetime.fromisoformat(value.strip())
        except ValueError:
            raise ValueError("write the instant as 2027-03-09T06:00:00Z") from None
    if isinstance(value, date) and not isinstance(value, datetime):
        raise ValueError("write the instant with its time of day and zone, as 2027-03-09T06:00:00Z")
    if not isinstance(value, datetime):
        raise ValueError("write the instant as 2027-03-09T06:00:00Z")
    if value.tzinfo is None:
        raise ValueError("the time has no zone; add Z for UTC or an offset such as +02:00")
    return value.astimezone(UTC)


def _listed(value: Any) -> Any:
    """A CSV cell holds a list as ``a;b``; TOML has real lists."""
    if isinstance(value, str):
        return tuple(part.strip() for part in value.split(";") if part.strip())
    return value


def _mask_points(value: Any) -> Any:
    """A CSV cell holds a mask as ``0:5;90:12``, azimuth and elevation in degrees."""
    if isinstance(value, str):
        try:
            return tuple(tuple(float(x) for x in point.split(":", 1)) for point in _listed(value))
        except ValueError:
            raise ValueError("write the mask as azimuth:elevation pairs in degrees, as 0:5;90:12") from None
    return value


def _pairs(value: Any) -> Any:
    """A CSV cell holds a curve as ``0:0;10:1.5``, the angle in degrees first."""
    if isinstance(value, str):
        try:
            return tuple(tuple(float(x) for x in point.split(":", 1)) for point in _listed(value))
        except ValueError:
            raise ValueError("write the curve as angle:value pairs, angles in degrees, as 0:0;10:1.5") from None
    return value


def check_angles(points: tuple[tuple[float, float], ...], most_deg: float) -> None:
    """Raise ValueError where the angles of a curve do not rise, or leave 0 to ``most_deg``."""
    angles = [angle for angle, _ in points]
    if any(not 0.0 <= angle <= most_deg for angle in angles):
        raise ValueError(f"the angles of the curve run from 0 to {most_deg:g} deg; correct the curve")
    if any(b <= a for a, b in pairwise(angles)):
        raise ValueError("the angles of the curve must rise; sort the curve")


def _sectors(value: Any) -> Any:
    """A CSV cell holds sectors as ``100:140:0:12``, azimuths from and to, elevations from and to, in degrees."""
    if isinstance(value, str):
        try:
            return tuple(tuple(float(x) for x in sector.split(":")) for sector in _listed(value))
        except ValueError:
            raise ValueError("write sectors as azimuth:azimuth:elevation:elevation, as 100:140:0:12") from None
    return value


NAME_PATTERN = r"^\w[\w \-]*$"

Instant = Annotated[datetime, BeforeValidator(parse_instant)]
Instants = Annotated[tuple[Instant, ...], BeforeValidator(_listed)]
Names = Annotated[tuple[str, ...], BeforeValidator(_listed)]
Polarisations = Annotated[tuple[Polarisation, ...], BeforeValidator(_listed)]
MaskPoints = Annotated[tuple[tuple[float, float], ...], BeforeValidator(_mask_points)]
Curve = Annotated[tuple[tuple[float, float], ...], BeforeValidator(_pairs)]
"""(angle in degrees, value) points, joined by straight lines."""
# Azimuths from and to (clockwise, across north if from is the larger), elevations from and to.
Sectors = Annotated[tuple[tuple[float, float, float, float], ...], BeforeValidator(_sectors)]
# A name goes into file names, identifiers (joined by dots) and tables: no dots, slashes or invisible characters.
Name = Annotated[str, Field(min_length=1, max_length=40, pattern=NAME_PATTERN)]

# A label is only ever shown, so that it may hold anything that prints.
Label = Annotated[str, Field(min_length=1, max_length=80, pattern=r"^[^\x00-\x1f\x7f]+$")]


def datetime64(instant: datetime) -> np.datetime64:
    """A zoned datetime as ``datetime64[ms]`` in UTC."""
    return np.datetime64(instant.astimezone(UTC).replace(tzinfo=None), "ms")
