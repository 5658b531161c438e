"""From the numbers of an element set to an initialised SGP4 propagator; every format ends here."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from datetime import date
from pathlib import Path

import numpy as np
from sgp4.api import WGS72, Satrec

from passplan.inputs.elements.model import ElementSet

# SGP4 counts days from 1949-12-31; this is that day counted from 2000-01-01.
_SGP4_DAY_ZERO = date(1949, 12, 31).toordinal() - date(2000, 1, 1).toordinal()
_MINUTES_PER_DAY = 1_440.0
_MOST_LETTER_CODED = 339_999
_SHORT_DESIGNATOR = re.compile(r"([0-9]{2})([0-9]{3})([A-Z]{1,3})")
_FULL_DESIGNATOR = re.compile(r"(?:19|20)([0-9]{2})-([0-9]{3})([A-Z]{1,3})")


@dataclass(frozen=True)
class MeanElements:
    """The numbers of one element set (SGP4 theory, TEME, UTC), in the units of the formats.

    ``epoch_days`` are whole days since 2000-01-01 and ``epoch_s`` the seconds of that day, UTC.
    ``mean_motion_dot_rev_per_day2`` is half the first derivative and ``mean_motion_ddot_rev_per_day3``
    a sixth of the second, as both formats give them; SGP4 carries but does not use them.
    """

    name: str
    catalogue_number: int | None
    international_designator: str
    epoch_days: int
    epoch_s: float
    mean_motion_rev_per_day: float
    eccentricity: float
    inclination_deg: float
    raan_deg: float
    argument_of_perigee_deg: float
    mean_anomaly_deg: float
    bstar_per_earth_radius: float
    mean_motion_dot_rev_per_day2: float = 0.0
    mean_motion_ddot_rev_per_day3: float = 0.0
    classification: str = "U"
    element_set_number: int = 0
    revolution: int = 0


def fault_of(mean: MeanElements) -> str | None:
    """A remedy if a number cannot belong to an orbit of the Earth, else None.

    Whether SGP4 itself can use the set is another question: a set of a decayed object is a sound set.
    """
    # The upper mean motion is that of a circle inside the Earth (about 17 rev/day at its surface).
    limits = (
        ("mean motion", mean.mean_motion_rev_per_day, 0.0, 20.0, "rev/day"),
        ("eccentricity", mean.eccentricity, 0.0, 1.0, ""),
        ("inclination", mean.inclination_deg, 0.0, 180.0, "deg"),
        ("right ascension of the node", mean.raan_deg, -360.0, 360.0, "deg"),
        ("argument of perigee", mean.argument_of_perigee_deg, -360.0, 360.0, "deg"),
        ("mean anomaly", mean.mean_anomaly_deg, -360.0, 360.0, "deg"),
    )
    for what, value, low, high, unit in limits:
        if not low <= value <= high:
            return f"the {what} {value:g} is not from {low:g} to {high:g} {unit}".rstrip() + "; correct the set"
    if mean.mean_motion_rev_per_day == 0.0 or mean.eccentricity == 1.0:
        return "the orbit is not closed (mean motion 0 or eccentricity 1); correct the set"
    return None


def element_set(mean: MeanElements, source: Path, place: str) -> ElementSet:
    """``mean`` as an :class:`ElementSet`, SGP4 initialised with the WGS 72 constants."""
    epoch = np.datetime64("2000-01-01", "us") + np.timedelta64(
        mean.epoch_days * 86_400_000_000 + round(mean.epoch_s * 1e6), "us"
    )
    return ElementSet(
        name=mean.name,
        catalogue_number=mean.catalogue_number,
        international_designator=full_designator(mean.international_designator),
        epoch_utc=epoch,
        satrec=satrec_of(mean),
        source=source,
        place=place,
    )


def satrec_of(mean: MeanElements) -> Satrec:
    """An SGP4 propagator for ``mean``. ``satrec.error`` is non-zero if SGP4 cannot use the elements.

    The propagator holds its number in five characters (339 999 at most), and the number has no part in
    the theory: above that it is given 0, and :class:`ElementSet` carries the real one.
    Units as AIAA 2006-6753, appendix B (``sgp4init``): radians and minutes.
    """
    rev_per_day = 2.0 * math.pi / _MINUTES_PER_DAY
    number = mean.catalogue_number or 0
    satrec = Satrec()
    satrec.sgp4init(
        WGS72,
        "i",
        number if number <= _MOST_LETTER_CODED else 0,
        mean.epoch_days - _SGP4_DAY_ZERO + mean.epoch_s / 86_400.0,
        mean.bstar_per_earth_radius,
        mean.mean_motion_dot_rev_per_day2 * rev_per_day / _MINUTES_PER_DAY,
        mean.mean_motion_ddot_rev_per_day3 * rev_per_day / _MINUTES_PER_DAY**2,
        mean.eccentricity,
        math.radians(mean.argument_of_perigee_deg),
        math.radians(mean.inclination_deg),
        math.radians(mean.mean_anomaly_deg),
        mean.mean_motion_rev_per_day * rev_per_day,
        math.radians(mean.raan_deg),
    )
    satrec.classification = mean.classification
    satrec.intldesg = short_designator(mean.international_designator)
    satrec.ephtype = 0
    satrec.elnum = mean.element_set_number
    satrec.revnum = mean.revolution
    return satrec


def full_designator(designator: str) -> str:
    """``98067A`` as ``1998-067A``; anything else unchanged. Years 57-99 are of the 20th century."""
    found = _SHORT_DESIGNATOR.fullmatch(designator.strip())
    return f"{four_digit_year(int(found[1]))}-{found[2]}{found[3]}" if found else designator.strip()


def short_designator(designator: str) -> str:
    """``1998-067A`` as ``98067A``, as the TLE column holds it; "" if it is none of the two."""
    found = _FULL_DESIGNATOR.fullmatch(designator) or _SHORT_DESIGNATOR.fullmatch(designator)
    return f"{found[1]}{found[2]}{found[3]}" if found else ""


def four_digit_year(two_digits: int) -> int:
    """The year of a two-digit year column: 57-99 are 1957-1999, 00-56 are 2000-2056 (AIAA 2006-6753)."""
    return two_digits + (1900 if two_digits >= 57 else 2000)
