"""How long an antenna is held beside a contact: the time to prepare and to release, by band and service."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from functools import cache

from passplan.inputs.contact_kind import ContactKind
from passplan.inputs.ground import Antenna
from passplan.inputs.run import Run
from passplan.link.chains import chains_between
from passplan.planning.hooks import Candidate
from passplan.planning.problem import Service


class SetupTimes:
    """Whole seconds before and after a contact, rounded up."""

    def __init__(self, run: Run) -> None:
        self._run = run
        self.longest = cache(self._longest)

    def of(self, antenna: str, candidate: Candidate) -> tuple[int, int]:
        """Seconds to prepare before and to release after one candidate on an antenna."""
        return _rounded(setup_s(self._run.antennas[antenna], candidate.service, candidate.carriers_mhz))

    def _longest(self, craft: str, antenna: str) -> tuple[int, int]:
        """The most seconds that any contact of a spacecraft on an antenna takes to prepare and to release."""
        ground = self._run.antennas[antenna]
        if not ground.setup:
            return _rounded((ground.prepare_s, ground.release_s))
        carriers: dict[Service, list[float]] = {"downlink": [], "command": []}
        for chain in chains_between(self._run, craft, antenna):
            carriers["downlink" if chain.direction == "downlink" else "command"].append(chain.frequency_mhz)
        carriers["both"] = [*carriers["downlink"], *carriers["command"]]
        offered = [service for service in carriers if carriers[service]]
        if not (carriers["downlink"] and carriers["command"]):
            offered = [service for service in offered if service != "both"]
        pairs = [setup_s(ground, service, carriers[service]) for service in offered]
        pairs = pairs or [(ground.prepare_s, ground.release_s)]
        return _rounded((max(a for a, _ in pairs), max(b for _, b in pairs)))


def setup_s(antenna: Antenna, service: Service, carriers_mhz: Iterable[float]) -> tuple[float, float]:
    """Seconds to prepare and to release: the longest of all rows of ``setup`` that mean such a contact.

    Where none states it, the antenna's own.
    """
    carriers = list(carriers_mhz)
    meant = [row for row in antenna.setup if means(row, service, carriers)]
    return (
        max((row.prepare_s for row in meant if row.prepare_s is not None), default=antenna.prepare_s),
        max((row.release_s for row in meant if row.release_s is not None), default=antenna.release_s))


def means(kind: ContactKind, service: Service, carriers_mhz: Sequence[float]) -> bool:
    """Whether a contact that offers ``service`` on these carriers is of the kind."""
    if kind.service is not None and service not in (kind.service, "both"):
        return False
    if kind.low_mhz is None or kind.high_mhz is None:
        return True
    return any(kind.low_mhz <= carrier <= kind.high_mhz for carrier in carriers_mhz)


def _rounded(pair: tuple[float, float]) -> tuple[int, int]:
    return math.ceil(pair[0]), math.ceil(pair[1])
