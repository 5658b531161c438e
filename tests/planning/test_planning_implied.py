"""What limits imply: nothing that they allow is left out, and halves of two contacts no longer go together."""

from __future__ import annotations

from itertools import combinations

import numpy as np
import pytest
from mixed_cases import mixed_problem
from planning_cases import some_of

from passplan.planning.implied import implied
from passplan.planning.occupancy import first_conflict
from passplan.planning.rules import all_terms
from passplan.planning.rules.rows import rows_of
from passplan.planning.rules.terms import Terms


@pytest.mark.parametrize("block", some_of(range(10), 2))
def test_what_the_terms_allow_is_allowed_by_what_they_imply(block: int) -> None:
    for seed in range(30 * block, 30 * block + 30):
        problem = mixed_problem(seed)
        count, terms = len(problem.options), all_terms(problem)
        more = terms + implied(terms, problem.options.spacecraft)
        # Removals and lanes are matters of one option and of two.
        for few in [*combinations(range(count), 1), *combinations(range(count), 2)]:
            if first_conflict(terms, count, few) is None:
                assert first_conflict(more, count, few) is None, f"seed {seed}: {few}"


def test_a_limit_with_room_for_one_of_several_is_a_lane_and_what_is_too_much_goes() -> None:
    owner = np.arange(5)
    terms = Terms(rows=(rows_of("line", [("the line", owner, [7.0, 5.0, 6.0, 2.0, 11.0], 10.0)]),))
    found = implied(terms, owner)
    assert [removal.options.tolist() for removal in found.removals] == [[4]]
    # 5 and 2 go together; 6 and 5, and all that is more, do not.
    assert [lane.options.tolist() for lane in found.lanes] == [[0, 1, 2, 4]]
    assert implied(terms, np.zeros(5, dtype=np.int64)).lanes == ()
