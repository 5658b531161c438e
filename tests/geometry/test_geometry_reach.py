from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from geometry_cases import GEOSYNCHRONOUS, LOW, NORTH, SITES, START, antenna, at_s, spans_s
from mount_cases import az_el, x_y

from passplan.geometry.pointing import look_angles
from passplan.geometry.reach import Reach, reach_of
from passplan.geometry.refraction import apparent_deg, bending_deg, geometric_deg
from passplan.geometry.windows import find_windows
from passplan.inputs.ground import Antenna
from passplan.inputs.mounts import Mount
from passplan.inputs.run import OrbitSource

DAYS = START + np.timedelta64(48, "h")


def _windows(source: OrbitSource, dish: Antenna, *mounts: Mount, refraction: bool = False) -> pd.DataFrame:
    named = {mount.name: mount for mount in mounts}
    return find_windows(
        {"Teal": source}, {"Dish": dish}, {"North": NORTH}, START, DAYS, mounts=named, refraction=refraction
    )


def _sampled_spans(source: OrbitSource, reach: Reach, mask_deg: float) -> np.ndarray:
    """Intervals above the mask and within reach, by one second steps."""
    seconds = np.arange(0.0, 2 * 86_400.0 + 1.0)
    seen = look_angles(source, NORTH, at_s(seconds))
    good = (seen.elevation_deg > mask_deg) & (reach.clearance_deg(seen.azimuth_deg, seen.elevation_deg) > 0.0)
    edges = np.flatnonzero(np.diff(np.concatenate([[False], good, [False]]).astype(int)))
    return np.stack([edges[::2], edges[1::2] - 1], -1).astype(float)


MOUNTS = {
    "ceiling": az_el(upper_from_deg=0.0, upper_to_deg=40.0),
    "floor": az_el(upper_from_deg=12.0, upper_to_deg=90.0),
    "x-y": x_y(lower_from_deg=-80.0, lower_to_deg=80.0, upper_from_deg=-70.0, upper_to_deg=75.0),
    "cone": Mount(name="Panel", kind="fixed", boresight_azimuth_deg=200.0, boresight_elevation_deg=50.0, cone_deg=45.0),
    "zenith cone": Mount(name="Panel", kind="fixed", cone_deg=60.0),
}


@pytest.mark.parametrize("name", MOUNTS)
def test_windows_are_what_one_second_sampling_leaves(name: str) -> None:
    mount = MOUNTS[name]
    table = _windows(LOW, antenna(mount=mount.name), mount)
    by_hand = _sampled_spans(LOW, Reach(mount), 5.0)
    found = spans_s(table)
    found = found[found[:, 1] - found[:, 0] > 2.0]
    by_hand = by_hand[by_hand[:, 1] - by_hand[:, 0] > 0.0]
    assert len(found) == len(by_hand) > 3
    assert np.max(np.abs(found - by_hand)) <= 1.001


def test_a_ceiling_splits_a_pass_and_its_pieces_keep_the_name_of_the_pass() -> None:
    whole = _windows(LOW, antenna())
    cut = _windows(LOW, antenna(mount="Turntable"), MOUNTS["ceiling"])
    high = whole[whole["peak_elevation_deg"] > 40.0]["window_id"].tolist()
    assert high
    for name in high:
        pieces = cut[cut["window_id"].str.startswith(name)]
        assert pieces["window_id"].tolist() == [name, f"{name}b"]
        # At the ceiling to 0.001 deg, whichever side.
        inner = np.array([pieces["los_utc"].iloc[0], pieces["aos_utc"].iloc[1]], "datetime64[ms]")
        np.testing.assert_allclose(look_angles(LOW, NORTH, inner).elevation_deg, 40.0, atol=2e-3)
    assert len(cut) == len(whole) + len(high)


def test_what_a_mount_never_reaches_gives_no_window() -> None:
    panel = Mount(name="Panel", kind="fixed", boresight_azimuth_deg=0.0, boresight_elevation_deg=60.0, cone_deg=5.0)
    assert len(_windows(GEOSYNCHRONOUS, antenna(mount="Panel", min_elevation_deg=1.0), panel)) == 0


def test_a_mount_without_limits_needs_no_cut() -> None:
    assert reach_of(az_el(lower_rate_deg_s=5.0), None) is None
    assert reach_of(None, None) is None


def test_refraction_by_p834() -> None:
    # ITU-R P.834: about 0.19 deg at 5 deg (value from memory in the references of this project).
    assert bending_deg(np.array([5.0]), 0.0)[0] == pytest.approx(0.19, abs=0.01)
    assert bending_deg(np.array([90.0]), 0.0)[0] == pytest.approx(0.0, abs=1e-12)
    elevation = np.linspace(-1.0, 89.0, 500)
    assert np.all(np.diff(apparent_deg(elevation, 0.4)) > 0.0)
    np.testing.assert_allclose(geometric_deg(apparent_deg(elevation, 0.4), 0.4), elevation, atol=1e-9)


def test_refraction_is_about_what_skyfields_optical_one_is() -> None:
    # Skyfield (Bennett's formula): about 0.16 deg at 5 deg; radio waves are bent more, as water vapour counts.
    from skyfield.earthlib import refraction

    optical = np.array([float(refraction(e, 10.0, 1010.0)) for e in (5.0, 10.0, 30.0)])
    radio = bending_deg(np.array([5.0, 10.0, 30.0]) - optical, 0.0)
    assert np.all((radio > 0.9 * optical) & (radio < 1.4 * optical))


@pytest.mark.parametrize("mask", [(), ((0.0, 5.0), (90.0, 12.0), (180.0, 4.0), (270.0, 20.0))])
def test_with_refraction_the_apparent_elevation_is_at_the_mask(mask: tuple[tuple[float, float], ...]) -> None:
    dish = antenna(mask=mask)
    plain, bent = (_windows(LOW, dish, refraction=on) for on in (False, True))
    longer = bent.merge(plain, on="window_id", suffixes=("", "_plain"))
    assert len(longer) >= len(plain) - 1
    assert longer["duration_s"].mean() > longer["duration_s_plain"].mean()
    inner = longer[longer["clipped"] == "none"]
    seen = look_angles(LOW, NORTH, inner["aos_utc"].to_numpy())
    from passplan.geometry.masks import mask_of

    level = mask_of(dish).elevation_deg(seen.azimuth_deg)
    np.testing.assert_allclose(apparent_deg(seen.elevation_deg, NORTH.height_m / 1e3), level, atol=3e-4)
    assert np.all(inner["peak_elevation_deg"] > inner["peak_elevation_deg_plain"])


def test_a_ceiling_counts_apparent_elevations_too() -> None:
    mount = az_el(upper_from_deg=0.0, upper_to_deg=8.0)
    table = _windows(LOW, antenna(mount="Turntable"), mount, refraction=True)
    first = table[table["window_id"] + "b" == table["window_id"].shift(-1)]
    seen = look_angles(LOW, SITES["North"], first["los_utc"].to_numpy())
    assert len(seen.elevation_deg) > 3
    np.testing.assert_allclose(apparent_deg(seen.elevation_deg, 0.39), 8.0, atol=1e-3)
