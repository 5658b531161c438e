"""Who else of the fleet is up on the same spectrum, and what that would leave of a link if all of them sent."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from passplan.geometry.axes import separation_deg
from passplan.geometry.pointing import LookAngles, look_angles
from passplan.inputs.run import Run
from passplan.link.budget import Floats
from passplan.link.chains import Chain
from passplan.link.interference import aggregate_db, beam_of, c_over_i_db, downlinks_of, spectrum_share


@dataclass(frozen=True)
class Neighbour:
    """Another spacecraft on the spectrum of a downlink, at n times: angle from the wanted one, range, C/I alone."""

    name: str
    apart_deg: Floats
    range_km: Floats
    ratio_db: Floats


def sharing(run: Run, chain: Chain, spacecraft: str) -> list[str]:
    """The other spacecraft that take part and send into the band of a downlink chain."""
    return [
        name for name in run.orbits
        if name != spacecraft and any(spectrum_share(run, chain, radio) > 0.0 for radio in downlinks_of(run, name))
    ]


def beam_known(chain: Chain) -> bool:
    """Whether C/I can be worked out: it takes the gain and the beamwidth of the receiving antenna."""
    return chain.receiver is not None and beam_of(chain.receiver, chain.frequency_mhz) is not None


def neighbours(
    run: Run, antenna: str, spacecraft: str, chain: Chain, look: LookAngles, times_utc: NDArray[np.datetime64]
) -> list[Neighbour]:
    """Those that are up at one of the times (n,), by rising C/I; none where the beam is not known.

    C/I is that of :func:`~passplan.link.interference.c_over_i_db`, infinite where one is down.
    """
    if not beam_known(chain):
        return []
    site, found = run.sites[run.antennas[antenna].site], []
    for name in sharing(run, chain, spacecraft):
        other = look_angles(run.orbits[name], site, times_utc, refraction=run.policy.refraction != "off")
        apart_deg = separation_deg(look.azimuth_deg, look.elevation_deg, other.azimuth_deg, other.elevation_deg)
        ratio_db = c_over_i_db(run, chain, name, site, (look, other), apart_deg)
        ratio_db = np.nan_to_num(ratio_db, nan=np.inf, posinf=np.inf)
        if np.any(np.isfinite(ratio_db)):
            found.append(Neighbour(name, apart_deg, other.range_km, ratio_db))
    return sorted(found, key=lambda entry: (float(np.min(entry.ratio_db)), entry.name))


def with_interference_db(es_over_n0_db: Floats, ratio_db: Floats) -> Floats:
    """Es/(N0 + I0) [dB]: the interference counts as noise, level across the band (definition)."""
    return aggregate_db([es_over_n0_db, ratio_db])
