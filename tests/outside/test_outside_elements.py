"""Element set layouts against what their publishers fix, and against independent readers."""

from __future__ import annotations

import json
import math
from io import StringIO

import numpy as np
import pytest
from sgp4 import omm as library_omm
from sgp4.alpha5 import from_alpha5, to_alpha5
from sgp4.api import Satrec

from passplan.inputs.elements.omm_json import parse_omm_json
from passplan.inputs.elements.tle import parse_tle
from passplan.inputs.elements.tle_layout import checksum, decoded_number
from passplan.inputs.errors import Findings

# The example that AIAA 2006-6753 prints for its "TEME example" (Vanguard 1, catalogue number 5).
VANGUARD = (
    "1 00005U 58002B   00179.78495062  .00000023  00000-0  28098-4 0  4753",
    "2 00005  34.2682 348.7242 1859667 331.7664  19.3264 10.82419157413667",
)


def test_the_checksum_of_the_published_example():
    # AIAA 2006-6753, SGP4-VER.TLE: column 69 of both lines.
    assert [checksum(line) for line in VANGUARD] == [3, 7]


def test_the_published_state_at_epoch():
    # AIAA 2006-6753, tcppver.out, object 5 at 0 min: position in km (TEME).
    (one,) = parse_tle("\n".join(VANGUARD), "published", Findings())
    _, position_km, velocity_km_s = one.satrec.sgp4_tsince(0.0)
    assert position_km == pytest.approx((7022.46529266, -1400.08296755, 0.03995155), abs=1e-7)
    assert velocity_km_s == pytest.approx((1.893841015, 6.405893759, 4.534807250), abs=1e-8)


def test_the_published_epoch():
    # AIAA 2006-6753, tcppver.out, object 5 at 360 min: 2000-06-28 00:50:19.733571 UTC.
    (one,) = parse_tle("\n".join(VANGUARD), "published", Findings())
    at = one.epoch_utc + np.timedelta64(360, "m")
    # The paper prints from one Julian date, which resolves 0.04 ms; the line itself says 19.733568 s.
    assert abs(at - np.datetime64("2000-06-28T00:50:19.733571")) <= np.timedelta64(40, "us")
    assert at == np.datetime64("2000-06-28T00:50:19.733568")


@pytest.mark.parametrize("number", [1, 99_999, 100_000, 148_493, 179_999, 180_000, 229_999, 230_000, 339_999])
def test_letter_coded_numbers_agree_with_the_library(number):
    # The sgp4 package's own coding, an independent reading of the published rule (no I, no O).
    assert decoded_number(to_alpha5(number)) == number == from_alpha5(to_alpha5(number))


def test_an_omm_agrees_with_the_library_s_reader():
    # sgp4.omm is an independent reader of CCSDS 502.0-B keywords.
    record = {
        "OBJECT_NAME": "MERLE 1", "OBJECT_ID": "2026-114A", "EPOCH": "2027-03-08T10:22:21.972864",
        "MEAN_MOTION": "15.21043218", "ECCENTRICITY": ".0011234", "INCLINATION": "97.4321",
        "RA_OF_ASC_NODE": "123.4567", "ARG_OF_PERICENTER": "87.6543", "MEAN_ANOMALY": "272.3456",
        "EPHEMERIS_TYPE": "0", "CLASSIFICATION_TYPE": "U", "NORAD_CAT_ID": "71001", "ELEMENT_SET_NO": "42",
        "REV_AT_EPOCH": "1234", "BSTAR": ".23456E-3", "MEAN_MOTION_DOT": ".12345E-3", "MEAN_MOTION_DDOT": "0",
    }  # fmt: skip
    theirs = Satrec()
    table = f"{','.join(record)}\n{','.join(record.values())}\n"
    library_omm.initialize(theirs, next(iter(library_omm.parse_csv(StringIO(table)))))
    (ours,) = parse_omm_json(json.dumps(record), "invented.json", Findings())
    for day in (0.0, 1.0, 7.0):
        at = (theirs.jdsatepoch, theirs.jdsatepochF + day)
        assert math.dist(ours.satrec.sgp4(*at)[1], theirs.sgp4(*at)[1]) < 1e-3
    assert ours.satrec.intldesg == theirs.intldesg
