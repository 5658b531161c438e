"""Is the spacecraft above the antenna's mask throughout the contact?"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from passplan.inputs.elements.model import ElementSet
from passplan.inputs.run import Run
from passplan.planning.audit.faults import Fault
from passplan.planning.audit.rows import Contact
from passplan.planning.audit.sky import Floats, Sight, lifted_deg, mask_deg, sight

_STEP_S = 10.0
# Windows are exact to a millisecond: a low orbit rises by 0.1 millidegree in that time. The audit
# interpolates ephemeris messages in its own way, which may differ by some tens of metres.
_TOLERANCE_DEG = 1e-4
_TOLERANCE_TABULATED_DEG = 1e-2


def instants(contact: Contact) -> Floats:
    """Start, middle and end of the contact and every 10 s, and the ends of its segments, in order."""
    grid = np.arange(contact.start_s, contact.end_s, _STEP_S)
    ends = [t for piece in contact.pieces for t in (piece.start_s, piece.end_s)]
    fixed = [contact.start_s, (contact.start_s + contact.end_s) / 2.0, contact.end_s, *ends]
    times = np.unique(np.concatenate((grid, fixed)))
    return times[(times >= contact.start_s) & (times <= contact.end_s)]


def sight_of(run: Run, contact: Contact) -> Sight:
    """Pointing at the :func:`instants` of a contact."""
    site = run.sites[run.antennas[contact.antenna].site]
    return sight(run.orbits[contact.spacecraft], site, run.start_utc, instants(contact))


def check_visibility(run: Run, contact: Contact, seen: Sight) -> Iterator[Fault]:
    """A fault where the spacecraft is below the mask, or its orbit is not known."""
    if not np.all(np.isfinite(seen.elevation_deg)):
        yield Fault("elevation", contact.place, "the orbit source does not cover the whole contact")
        return
    tabulated = not isinstance(run.orbits[contact.spacecraft], ElementSet)
    tolerance_deg = _TOLERANCE_TABULATED_DEG if tabulated else _TOLERANCE_DEG
    mask = mask_deg(run.antennas[contact.antenna], seen.azimuth_deg)
    below_deg = mask - lifted_deg(run, contact.antenna, seen.elevation_deg)
    worst = int(np.argmax(below_deg))
    if below_deg[worst] > tolerance_deg:
        yield Fault(
            "elevation",
            contact.place,
            f"{seen.time_s[worst] - contact.start_s:.0f} s after its start the spacecraft stands at"
            f" {seen.elevation_deg[worst]:.3f} deg, below the mask of {mask[worst]:.3f} deg",
        )
