"""What requests, pins and emergencies with a stand-by ask of options: a second antenna, held beside the first."""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Flags, Integers
from passplan.planning.option_table import Options
from passplan.planning.problem import Service
from passplan.planning.rules.rows import rows_of
from passplan.planning.rules.terms import Rows

NO_STANDBY = "no second antenna can follow for as long and stand by"


def backed(options: Options, service: Service | None, antennas: frozenset[int] | None = None) -> Flags:
    """Which options hold an antenna (one of ``antennas``) as a stand-by that offers ``service``, shape (m,).

    Without ``service`` it is to offer what the contact itself does.
    """
    further = options.further
    downlink = options.downlink[further.option] if service is None else np.array(service != "command")
    command = options.command[further.option] if service is None else np.array(service != "downlink")
    able = (further.downlink | ~downlink) & (further.command | ~command)
    if antennas is not None:
        able &= np.isin(further.antenna, sorted(antennas))
    held = np.zeros(len(options), dtype=bool)
    held[further.option[able]] = True
    return held


def one_standby(name: str, options: Integers) -> Rows:
    """Of the contacts that hold a stand-by for ``name`` one is enough; more would hold antennas for nothing."""
    return rows_of("standby", [(f"the stand-by for {name}", options, np.ones(len(options)), 1.0)])
