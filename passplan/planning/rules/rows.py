"""Ways to make :class:`~passplan.planning.rules.terms.Rows`; rows that cannot bind are left out."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

import numpy as np

from passplan.planning.arrays import Floats, Integers, offsets_of, ragged_ranges
from passplan.planning.cliques import clique_spans
from passplan.planning.rules.terms import Rows

Row = tuple[str, Sequence[int] | Integers, Sequence[float] | Floats, float]
"""Name, options, their amounts, and the limit."""


def rows_of(kind: str, rows: Iterable[Row]) -> Rows:
    """Rows from one tuple each; those that all their options together keep are left out."""
    kept = [(name, np.asarray(options, dtype=np.int64), np.asarray(amounts, dtype=float), float(limit))
            for name, options, amounts, limit in rows]
    kept = [row for row in kept if row[2].sum() > row[3]]
    return Rows(
        kind, tuple(row[0] for row in kept), offsets_of(np.array([len(row[1]) for row in kept], dtype=np.int64)),
        np.concatenate([np.zeros(0, dtype=np.int64), *(row[1] for row in kept)]),
        np.concatenate([np.zeros(0), *(row[2] for row in kept)]), np.array([row[3] for row in kept], dtype=float))


def at_the_same_time(
    kind: str, name: str, options: Integers, start_s: Integers, end_s: Integers, limit: float,
    amounts: Floats | None = None,
) -> Rows:
    """At every instant, the amounts (default 1 each) of options that hold ``[start_s, end_s)`` add up to ``limit``.

    One row for each maximal set of options that overlap: what is used is most at the start of one of them. An option
    that is there twice (it holds two antennas) uses the sum.
    """
    first, last, cliques = clique_spans(start_s, end_s)
    clique = ragged_ranges(first, last - first)
    member = np.repeat(np.arange(len(options)), last - first)
    order = np.lexsort((member, clique))
    clique, member = clique[order], member[order]
    held: Floats = (np.ones(len(options)) if amounts is None else amounts)[member]
    mine = options[member]
    if len(np.unique(options)) < len(options):
        (clique, mine), which = np.unique(np.stack([clique, mine]), axis=1, return_inverse=True)
        held = np.asarray(np.bincount(which.ravel(), weights=held), dtype=np.float64)
    binding = np.bincount(clique, weights=held, minlength=cliques) > limit
    kept = binding[clique]
    counts = np.bincount(clique[kept], minlength=cliques)[binding]
    return Rows(
        kind, (name,) * len(counts), offsets_of(counts.astype(np.int64)), mine[kept], held[kept],
        np.full(len(counts), float(limit)))
