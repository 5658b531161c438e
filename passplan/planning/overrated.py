"""Where the model thinks more of a spacecraft's contacts than they are worth, and how it is told.

The layers of some spacecraft (:attr:`~passplan.planning.problem.Fleet.loose`) are a ceiling of their worth. For the
very contacts S that the model chose for one, the account knows better by some d > 0. A new column z in [0, 1] that
costs d, with

    z >= 1 - (contacts of S that are left out) - (other contacts of the spacecraft that are used)

takes d off these contacts and nothing off any other choice, so that the bound holds and no choice is overrated
twice. Each round is a solve; on small problems the rounds end when the value meets the bound, on large ones the time
ends them. (Own derivation, after the no-good cuts of integer programming.)
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from passplan.planning.arrays import Integers
from passplan.planning.maps import StorageMaps, worth_by_layers
from passplan.planning.problem import Problem
from passplan.planning.value import worth_followed

# Nearer than this part of the figures the layers and the account agree.
_ALIKE = 1e-9


@dataclass(frozen=True, eq=False)
class Overrated:
    """Exactly ``chosen`` of the options ``mine`` of one spacecraft are worth ``worth`` less than their layers say."""

    mine: Integers
    chosen: Integers
    worth: float


def find_overrated(
    problem: Problem, maps: StorageMaps, chosen: Iterable[int], known: Sequence[Overrated],
) -> list[Overrated]:
    """The loose spacecraft whose part of ``chosen`` is overrated, without those of which the model knows."""
    options = problem.options
    picked = np.array(sorted(chosen), dtype=np.int64)
    # The options too, as nothing chosen at all looks alike for every spacecraft.
    told = {(one.mine.tobytes(), one.chosen.tobytes()) for one in known}
    found = []
    for craft in sorted(problem.fleet.loose):
        mine = np.flatnonzero(options.spacecraft == craft)
        own = picked[options.spacecraft[picked] == craft]
        in_order = own[np.argsort(options.start_s[own], kind="stable")].tolist()
        ceiling = worth_by_layers(problem, maps, craft, in_order)
        excess = ceiling - worth_followed(problem, craft, in_order)
        if excess > _ALIKE * max(1.0, abs(ceiling)) and (mine.tobytes(), own.tobytes()) not in told:
            found.append(Overrated(mine, own, excess))
    return found
