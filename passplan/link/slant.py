"""Everything of a link that depends on elevation alone, as one table per chain and site.

The table is so fine that a straight line between its entries stays within 0.01 dB of the models above 3 deg
(but for the steps that P.618 itself has at 5 and 25 deg, which it bridges), and it is looked up by its index,
which is what makes a sample cheap. Entries are evenly spaced in the square root of the zenith distance:

    elevation    -6 ... 5 ........ 45 .......... 89 ... 90 deg
    spacing      0.02   0.02       0.014         0.002
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from passplan.inputs.run import Run
from passplan.link.atmosphere import Sky, SkyPath
from passplan.link.budget import Floats
from passplan.link.chains import Chain
from passplan.link.noise import dish_of, figure_drop_db, system_noise_at_k

_PER_ROOT = 940
GRID_DEG: Floats = 90.0 - (np.arange(int(_PER_ROOT * 96.0**0.5) + 2) / _PER_ROOT) ** 2


@dataclass(frozen=True, eq=False)
class SlantTable:
    """On ``GRID_DEG``: the loss by air, radome and noise together [dB], and the system noise [K] where known."""

    loss_db: Floats
    noise_k: Floats | None


def sky_path(run: Run, antenna: str, chain: Chain) -> SkyPath:
    """The path through the air over the antenna's site that a chain takes, under the run's policy."""
    diameter_m: float | None = None
    efficiency = 0.6
    if chain.receiver is not None:
        diameter_m, efficiency = dish_of(chain.receiver, chain.frequency_mhz)[0], chain.receiver.aperture_efficiency
    site = run.sites[run.antennas[antenna].site]
    return SkyPath(
        site, chain.frequency_mhz, chain.polarisation, run.policy.unavailability_percent,
        round(diameter_m or 0.0, 3), efficiency,
    )


def slant_table(chain: Chain, path: SkyPath, sky: Sky) -> SlantTable:
    """The table of one chain under one sky."""
    radome_db = chain.wet_radome_loss_db if path.wet else 0.0
    air = sky.at(GRID_DEG)
    loss_db = air.total_db + radome_db
    if chain.receiver is None:
        return SlantTable(loss_db, None)
    noise_k = system_noise_at_k(chain.receiver, sky, GRID_DEG, radome_db, air)
    return SlantTable(loss_db + figure_drop_db(chain.receiver, GRID_DEG, noise_k), noise_k)


def look_up(stack: Floats, row: NDArray[np.int64], elevation_deg: Floats) -> Floats:
    """Values of the rows of ``stack``, shape (tables, grid), at an elevation [deg] each; ``row`` is the row of each."""
    place = np.sqrt(np.maximum(90.0 - elevation_deg, 0.0)) * _PER_ROOT
    lower = np.clip(place.astype(np.int64), 0, GRID_DEG.size - 2)
    flat, at = stack.ravel(), row * GRID_DEG.size + lower
    below = flat[at]
    return np.asarray(below + np.clip(place - lower, 0.0, 1.0) * (flat[at + 1] - below))
