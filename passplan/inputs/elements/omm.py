"""Orbit mean-elements messages: from the keywords of one message to an element set, whatever the encoding.

The encodings themselves are read in ``omm_json``, ``omm_xml``, ``omm_kvn`` and ``omm_csv``; each gives
plain records of keyword and value and hands them to :func:`sets_of`.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Annotated, Any

from pydantic import BeforeValidator, ConfigDict, Field

from passplan.inputs.ccsds_time import days_and_seconds
from passplan.inputs.elements.mean import MeanElements, element_set, fault_of
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.errors import Findings
from passplan.inputs.lines import shortened
from passplan.inputs.records import Record
from passplan.inputs.tables import checked

KEYWORDS = frozenset(
    {
        "CCSDS_OMM_VERS",
        "MEAN_ELEMENT_THEORY",
        "TIME_SYSTEM",
        "REF_FRAME",
        "CENTER_NAME",
        "OBJECT_NAME",
        "OBJECT_ID",
        "NORAD_CAT_ID",
        "EPOCH",
        "MEAN_MOTION",
        "ECCENTRICITY",
        "INCLINATION",
        "RA_OF_ASC_NODE",
        "ARG_OF_PERICENTER",
        "MEAN_ANOMALY",
        "BSTAR",
        "MEAN_MOTION_DOT",
        "MEAN_MOTION_DDOT",
        "EPHEMERIS_TYPE",
        "CLASSIFICATION_TYPE",
        "ELEMENT_SET_NO",
        "REV_AT_EPOCH",
    }
)
"""The keywords that are read. Others (spacecraft parameters, covariance, USER_DEFINED_...) do not bear on SGP4."""

# Keys that must stand in the message but may be left empty: an object fresh from launch has neither.
_MAY_BE_EMPTY = ("OBJECT_NAME", "OBJECT_ID")
_NO_DESIGNATOR = ("UNKNOWN", "NONE", "TBA", "N/A")

_ONLY_THESE = {
    "MEAN_ELEMENT_THEORY": ("SGP4", "SGP/SGP4"),
    "TIME_SYSTEM": ("UTC",),
    "REF_FRAME": ("TEME",),
    "CENTER_NAME": ("EARTH",),
}

_UNITS = {
    "MEAN_MOTION": ("rev/day",),
    "INCLINATION": ("deg",),
    "RA_OF_ASC_NODE": ("deg",),
    "ARG_OF_PERICENTER": ("deg",),
    "MEAN_ANOMALY": ("deg",),
    "BSTAR": ("1/er",),
    "MEAN_MOTION_DOT": ("rev/day**2",),
    "MEAN_MOTION_DDOT": ("rev/day**3",),
}

OmmRecord = tuple[str, Mapping[str, Any]]
"""A place (``record 3``, ``row 4``) and the keywords that stand there."""


def _epoch(value: Any) -> tuple[int, float]:
    if not isinstance(value, str):
        raise ValueError("write the epoch as text, as 2027-03-09T06:00:00.000000")
    days, seconds = days_and_seconds(value)
    # Before the first satellite, or beyond what SGP4 was made for: the year is a slip of the pen.
    if not -15_706 <= days <= 73_049:
        raise ValueError("the epoch is not from 1957 to 2199; correct it")
    return days, seconds


_Text = Annotated[str, Field(max_length=100)]


class _Omm(Record):
    """The keywords that SGP4 needs, in the units of the standard (deg, rev/day, 1/Earth radius)."""

    model_config = ConfigDict(extra="ignore")

    object_name: _Text = Field(alias="OBJECT_NAME")
    object_id: _Text = Field(alias="OBJECT_ID")
    catalogue_number: Annotated[int, Field(ge=0, le=999_999_999)] | None = Field(None, alias="NORAD_CAT_ID")
    epoch: Annotated[tuple[int, float], BeforeValidator(_epoch)] = Field(alias="EPOCH")
    mean_motion_rev_per_day: float = Field(alias="MEAN_MOTION")
    eccentricity: float = Field(alias="ECCENTRICITY")
    inclination_deg: float = Field(alias="INCLINATION")
    raan_deg: float = Field(alias="RA_OF_ASC_NODE")
    argument_of_perigee_deg: float = Field(alias="ARG_OF_PERICENTER")
    mean_anomaly_deg: float = Field(alias="MEAN_ANOMALY")
    bstar_per_earth_radius: float = Field(alias="BSTAR")
    mean_motion_dot_rev_per_day2: float = Field(0.0, alias="MEAN_MOTION_DOT")
    mean_motion_ddot_rev_per_day3: float = Field(0.0, alias="MEAN_MOTION_DDOT")
    ephemeris_type: int = Field(0, alias="EPHEMERIS_TYPE")
    classification: Annotated[str, Field(max_length=1)] = Field("U", alias="CLASSIFICATION_TYPE")
    element_set_number: Annotated[int, Field(ge=0, le=999_999_999)] = Field(0, alias="ELEMENT_SET_NO")
    revolution: Annotated[int, Field(ge=0, le=999_999_999)] = Field(0, alias="REV_AT_EPOCH")


MANDATORY = tuple(str(field.alias) for field in _Omm.model_fields.values() if field.is_required())


def sets_of(records: Iterable[OmmRecord], file: str | Path, findings: Findings) -> list[ElementSet]:
    """The element sets of ``records``; each fault is noted as a problem with its place and keyword.

    Mandatory are the keywords that CCSDS 502.0-B-3 asks for with SGP4 (tables 4-2 and 4-3): OBJECT_NAME
    and OBJECT_ID (empty allowed), EPOCH, MEAN_MOTION and the other elements, and BSTAR. Theory, time
    system, frame and centre must be SGP4, UTC, TEME and EARTH where they are stated (JSON and CSV
    leave them out by custom). Catalogue numbers go to nine digits; an absent one, or 0, is None.
    """
    sets: list[ElementSet] = []
    for where, record in records:
        present = _present(record)
        place = f"{where} ({shortened(str(present['OBJECT_NAME']), 40)})" if present.get("OBJECT_NAME") else where
        if not _is_sgp4(present, file, place, findings) or not _is_plain(present, file, place, findings):
            continue
        omm: _Omm | None = checked(_Omm, present, file, place, findings)
        if omm is None:
            continue
        mean = _mean_elements(omm)
        fault = fault_of(mean)
        if omm.ephemeris_type not in (0, 2):
            fault = f"EPHEMERIS_TYPE {omm.ephemeris_type} is not SGP4 (0); fetch the SGP4 set"
        if fault is not None:
            findings.problem(file, place, None, fault)
            continue
        sets.append(element_set(mean, Path(file), where))
    return sets


def unit_is_right(keyword: str, unit: str) -> bool:
    """Whether a stated unit is the one that the standard fixes for the keyword; "" and unknown keywords pass."""
    return not unit or keyword not in _UNITS or unit.lower().replace(" ", "") in _UNITS[keyword]


def _present(record: Mapping[str, Any]) -> dict[str, Any]:
    """The keywords that are read and have a value; an empty cell, text or null is as good as absent."""
    kept = {}
    for key, value in record.items():
        bare = value.strip() if isinstance(value, str) else value
        empty = bare is None or bare == ""
        if key in KEYWORDS and (not empty or key in _MAY_BE_EMPTY):
            kept[key] = "" if empty else bare
    return kept


def _is_sgp4(record: Mapping[str, Any], file: str | Path, place: str, findings: Findings) -> bool:
    sound = True
    for key, accepted in _ONLY_THESE.items():
        value = record.get(key)
        if value is not None and str(value).upper() not in accepted:
            findings.problem(
                file, f"{place}.{key}", value, f"only {' or '.join(accepted)} can be read; convert the set"
            )
            sound = False
    return sound


def _is_plain(record: Mapping[str, Any], file: str | Path, place: str, findings: Findings) -> bool:
    """Whether all values are numbers or text. Without this, ``true`` would pass as the number 1."""
    sound = True
    for key, value in record.items():
        if isinstance(value, bool) or not isinstance(value, str | int | float):
            findings.problem(file, f"{place}.{key}", None, "holds neither a number nor text; write one")
            sound = False
    return sound


def _mean_elements(omm: _Omm) -> MeanElements:
    return MeanElements(
        name=omm.object_name,
        catalogue_number=omm.catalogue_number or None,
        international_designator="" if omm.object_id.upper() in _NO_DESIGNATOR else omm.object_id,
        epoch_days=omm.epoch[0],
        epoch_s=omm.epoch[1],
        mean_motion_rev_per_day=omm.mean_motion_rev_per_day,
        eccentricity=omm.eccentricity,
        inclination_deg=omm.inclination_deg,
        raan_deg=omm.raan_deg,
        argument_of_perigee_deg=omm.argument_of_perigee_deg,
        mean_anomaly_deg=omm.mean_anomaly_deg,
        bstar_per_earth_radius=omm.bstar_per_earth_radius,
        mean_motion_dot_rev_per_day2=omm.mean_motion_dot_rev_per_day2,
        mean_motion_ddot_rev_per_day3=omm.mean_motion_ddot_rev_per_day3,
        classification=omm.classification,
        element_set_number=omm.element_set_number,
        revolution=omm.revolution,
    )
