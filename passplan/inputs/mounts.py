"""What the user says of the mechanics that point an antenna."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from passplan.inputs.records import Name, Record

_Angle = Annotated[float, Field(ge=-720.0, le=720.0)]
_Rate = Annotated[float, Field(gt=0.0, le=360.0)]


class Mount(Record):
    """Two axes, the lower one carrying the upper one; or none at all, for an aperture that does not move.

    ============  ====================================  ====================================================
    kind          lower axis                            upper axis
    ============  ====================================  ====================================================
    ``az_el``     azimuth                               elevation
    ``x_y``       X, about a horizontal line towards    Y, towards that line; 0 at the zenith, as is X
                  ``lower_axis_azimuth_deg``
    ``fixed``     none: everything within ``cone_deg``  of the boresight is reached at once
    ============  ====================================  ====================================================

    ``*_from_deg`` and ``*_to_deg`` are the mechanical limits; the azimuth travel may exceed 360 deg, and
    runs over as many turns as the cables allow. Rates in deg/s, accelerations in deg/s2; what is absent
    does not limit.
    """

    name: Name
    kind: Literal["az_el", "x_y", "fixed"]
    lower_rate_deg_s: _Rate | None = None
    upper_rate_deg_s: _Rate | None = None
    lower_acceleration_deg_s2: _Rate | None = None
    upper_acceleration_deg_s2: _Rate | None = None
    lower_from_deg: _Angle | None = None
    lower_to_deg: _Angle | None = None
    upper_from_deg: _Angle | None = None
    upper_to_deg: _Angle | None = None
    lower_axis_azimuth_deg: Annotated[float, Field(ge=0.0, lt=360.0)] | None = None
    boresight_azimuth_deg: Annotated[float, Field(ge=0.0, le=360.0)] | None = None
    boresight_elevation_deg: Annotated[float, Field(ge=0.0, le=90.0)] | None = None
    cone_deg: Annotated[float, Field(gt=0.0, le=90.0)] | None = None

    @model_validator(mode="after")
    def _consistent(self) -> Mount:
        for key in self.model_fields_set - {"name", "kind"}:
            if getattr(self, key) is not None and self.kind not in _KINDS_OF.get(key, ("az_el", "x_y")):
                raise ValueError(f"{key} means nothing to a mount of kind {self.kind}; remove it")
        if self.kind == "fixed" and self.cone_deg is None:
            raise ValueError("a fixed aperture needs cone_deg, the half-angle of its view")
        for axis in ("lower", "upper"):
            low, high = getattr(self, f"{axis}_from_deg"), getattr(self, f"{axis}_to_deg")
            if (low is None) != (high is None):
                raise ValueError(f"give both {axis}_from_deg and {axis}_to_deg, or neither")
            if low is not None and low >= high:
                both = f"{axis}_from_deg {low:g} is not below {axis}_to_deg {high:g}"
                raise ValueError(f"{both}; the limits exclude everything")
            if getattr(self, f"{axis}_acceleration_deg_s2") and not getattr(self, f"{axis}_rate_deg_s"):
                raise ValueError(f"{axis}_acceleration_deg_s2 needs {axis}_rate_deg_s; add it")
        if self.kind == "az_el" and self.upper_to_deg is not None and self.upper_to_deg <= 0.0:
            raise ValueError(f"upper_to_deg {self.upper_to_deg:g} leaves nothing above the horizon; raise it")
        return self

    @property
    def moves(self) -> bool:
        """Whether rates or travel limit what it can follow."""
        return self.lower_rate_deg_s is not None or self.upper_rate_deg_s is not None


_KINDS_OF: dict[str, tuple[str, ...]] = {
    "lower_axis_azimuth_deg": ("x_y",),
    "boresight_azimuth_deg": ("fixed",),
    "boresight_elevation_deg": ("fixed",),
    "cone_deg": ("fixed",),
}
