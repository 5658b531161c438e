"""What limits imply: options that alone are too much for one, and options of which no two go together under it.

Prices of a limit alone let half of one contact go beside half of another. Where two take more than there is, they are
better told apart: as options of a lane, which one contact holds at a time. (The clique that a knapsack row contains;
own derivation: by falling amounts, the options down to the last whose amount and that before it exceed the limit.)
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from passplan.planning.arrays import Integers
from passplan.planning.rules.terms import Lane, Removal, Rows, Terms

# Amounts are sums of decimals: what exceeds a limit by less than this part may be kept.
_ROUNDING = 1e-6


def implied(terms: Terms, owner: Integers) -> Terms:
    """Removals and lanes that the rows of ``terms`` imply; ``owner`` (m,) is the spacecraft of each option.

    Lanes are for contacts of several spacecraft: those of one follow each other, and its rows are many.
    """
    removals, lanes, seen = [], list[Lane](), set[bytes]()
    for rows in terms.rows:
        row = np.repeat(np.arange(len(rows)), np.diff(rows.offset))
        alone = rows.amounts > rows.limit[row] + _ROUNDING * (1.0 + rows.limit[row])
        if np.any(alone):
            removals.append(Removal(np.unique(rows.options[alone]), rows.kind, "is alone more than the limit"))
        for name, options in _together(rows, owner):
            if options.tobytes() not in seen:
                seen.add(options.tobytes())
                same = np.zeros(len(options), dtype=np.int64)
                lanes.append(Lane(name, rows.kind, options, same, same + 1))
    return Terms(removals=tuple(removals), lanes=tuple(lanes))


def _together(rows: Rows, owner: Integers) -> Iterator[tuple[str, Integers]]:
    """Of each row that concerns several spacecraft, the options of which it leaves room for one."""
    for r, name in enumerate(rows.names):
        span = slice(rows.offset[r], rows.offset[r + 1])
        options, amounts = rows.options[span], rows.amounts[span]
        order = np.argsort(-amounts, kind="stable")
        pairs = amounts[order][:-1] + amounts[order][1:] > rows.limit[r] + _ROUNDING * (1.0 + rows.limit[r])
        mine = options[order[: 1 + int(np.argmin(np.append(pairs, False)))]]
        says_so = len(mine) == len(options) and bool(np.all(amounts >= rows.limit[r]))
        if len(np.unique(owner[mine])) > 1 and not says_so:
            yield name, np.sort(mine)
