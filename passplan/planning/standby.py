"""Contacts with a second antenna at the ready, which follows the spacecraft for as long and could take over.

Such a contact is one option that holds two antennas. Only the first brings data down.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import replace

import numpy as np

from passplan.planning.hooks import Candidate, Standby
from passplan.planning.problem import Service, Windows

Make = Callable[[int, int, int], Candidate | None]
Free = Callable[[int, int, int], Sequence[tuple[int, int]]]


def standby_candidates(
    asked: Sequence[Standby], windows: Windows, fleet: Sequence[str], antennas: Sequence[str],
    own: Mapping[int, Sequence[Candidate]], make: Make, free: Free,
) -> Iterator[Candidate]:
    """Each contact with each stand-by that somebody asked for.

    ``own`` are the plain candidates of the windows, ``make(window, start_s, end_s)`` a new one, or None, and
    ``free`` the parts of a span of a window in which a contact is possible. Of each pair of windows come all of the
    time that both can follow and the plain candidates within it.
    """
    found: set[tuple[int, int, int, int]] = set()
    for want in asked:
        if want.spacecraft not in fleet:
            continue
        seen = windows.spacecraft == fleet.index(want.spacecraft)
        seen &= (windows.start_s < want.end_s) & (windows.end_s > want.start_s)
        mine = np.flatnonzero(seen).tolist()
        for w, second in ((w, v) for w in mine for v in mine if windows.antenna[w] != windows.antenna[v]):
            places = antennas[int(windows.antenna[w])], antennas[int(windows.antenna[second])]
            if places[0] not in want.antennas or places[1] not in want.standbys:
                continue
            low = max(want.start_s, int(windows.start_s[w]), int(windows.start_s[second]))
            high = min(want.end_s, int(windows.end_s[w]), int(windows.end_s[second]))
            if low >= high:
                continue
            both = [(a, b) for c, d in free(w, low, high) for a, b in free(second, c, d)]
            within = sorted({(c.start_s, c.end_s) for c in own.get(w, ()) if any(
                a <= c.start_s and c.end_s <= b for a, b in both)} - set(both))
            for start_s, end_s in [*both, *within]:
                if (w, second, start_s, end_s) in found:
                    continue
                first, spare = make(w, start_s, end_s), make(second, start_s, end_s)
                if first is not None and spare is not None and covers(first, want.service) and covers(
                    spare, want.service or first.service
                ):
                    found.add((w, second, start_s, end_s))
                    yield replace(first, further=(spare,))


def covers(candidate: Candidate, service: Service | None) -> bool:
    """Whether a contact offers the service that is asked for, if any is."""
    return service is None or candidate.service in (service, "both")
