"""Windows that the plan does not use, each with a reason from a short closed list and a sentence."""

from __future__ import annotations

import numpy as np
import pandas as pd

from passplan.planning.greedy import worth_beside
from passplan.planning.maps import storage_maps, worth_of
from passplan.planning.occupancy import Blocker, Occupancy
from passplan.planning.options import OptionSet
from passplan.planning.problem import Problem
from passplan.planning.record import UNUSED_COLUMNS
from passplan.planning.result import PlanResult
from passplan.planning.rules.terms import Terms

REASONS = (
    "closure", "too_short", "no_radio", "no_margin", "not_needed", "antenna_busy", "antenna_turning", "spacecraft_busy",
    "nothing_aboard", "not_worth_it", "interference", "contact_gap", "cool_down", "forbidden",
    "contacts_per_orbit", "contacts_per_day", "sending_per_contact", "sending_per_orbit", "sending_per_span",
    "battery", "imaging", "attitude", "loaded",
    "equipment_busy", "staff_busy", "unstaffed", "declined", "too_late_to_ask", "backhaul_full", "backhaul_busy",
    "backhaul_closed", "budget", "standby")
"""``not_needed``: the antenna can only command, and nothing asks for it. Rules may add their own reasons."""


def unused_table(
    run_start_utc: np.datetime64, windows: pd.DataFrame, problem: Problem, option_set: OptionSet, terms: Terms,
    result: PlanResult,
) -> pd.DataFrame:
    """One row for each window without a contact, in the order of ``windows``."""
    explainer = _Explainer(run_start_utc, problem, terms, result)
    holds = problem.options.holds
    used = {int(w) for w in holds.window[np.isin(holds.option, result.chosen)]}
    rows = [w for w in range(len(windows)) if w not in used]
    reasons = [option_set.excluded.get(w) or explainer.reason(w) for w in rows]
    table = windows.iloc[rows][list(UNUSED_COLUMNS[:5])].reset_index(drop=True)
    table["reason"] = pd.Series([code for code, _ in reasons], dtype="object")
    table["detail"] = pd.Series([detail for _, detail in reasons], dtype="object")
    return table


class _Explainer:
    def __init__(self, start_utc: np.datetime64, problem: Problem, terms: Terms, result: PlanResult) -> None:
        self.start_utc, self.problem = start_utc, problem
        self.maps = storage_maps(problem)
        self.occupancy = Occupancy(terms, len(problem.options))
        self.of_craft: list[list[int]] = [[] for _ in range(len(problem.fleet))]
        for o in result.account.chosen.tolist():
            self.occupancy.add(o)
            self.of_craft[int(problem.options.spacecraft[o])].append(o)
        self.worth: dict[int, float] = {}
        self.removed = {int(o): (r.reason, r.detail) for r in terms.removals for o in r.options}
        order = np.argsort(problem.options.window, kind="stable")
        self._order, self._sorted = order, problem.options.window[order]

    def reason(self, window: int) -> tuple[str, str]:
        """Why none of the options of a window is in the plan."""
        low, high = np.searchsorted(self._sorted, [window, window + 1])
        mine = self._order[low:high].tolist()
        usable = [o for o in mine if o not in self.removed]
        if not usable:
            return self.removed[mine[0]]
        options = self.problem.options
        free = [o for o in usable if self.occupancy.fits(o)]
        if free:
            return self._why_not_taken(free)
        # The option with the fewest contacts in its way says most; among those, the longest.
        stuck = min(usable, key=lambda o: (
            len(set(self.occupancy.blockers(o))), int(options.start_s[o] - options.end_s[o])))
        blocker = next(iter(self.occupancy.blockers(stuck)))
        return blocker.kind, self._sentence(blocker, stuck)

    def _why_not_taken(self, free: list[int]) -> tuple[str, str]:
        problem = self.problem
        craft = int(problem.options.spacecraft[free[0]])
        if not problem.options.downlink[free].any():
            return "not_needed", "it can only command then, and no command contact that is asked for needs it"
        if craft not in self.worth:
            self.worth[craft] = worth_of(problem, self.maps, craft, self.of_craft[craft])
        most, best = max((worth_beside(problem, self.maps, self.of_craft[craft], o), -k) for k, o in enumerate(free))
        gain, best = most - self.worth[craft], free[-best]
        name = problem.fleet.names[craft]
        cost = max(0.0, float(problem.price[best]))
        if gain + cost <= 1e-9 * max(1.0, float(problem.fleet.capacity_mb[craft])):
            return "nothing_aboard", f"the other contacts of {name} bring down as much without it"
        return "not_worth_it", f"it would add {gain + cost:.6g} in value at a cost of {cost:.6g}"

    def _sentence(self, blocker: Blocker, stuck: int) -> str:
        options, fleet, other = self.problem.options, self.problem.fleet, blocker.option
        if other == stuck:
            return f"{blocker.name}: it would need more than there is"
        a, b = (str(self.start_utc.astype("datetime64[s]") + np.timedelta64(int(t), "s"))[11:]
                for t in (options.start_s[other], options.end_s[other]))
        craft, names = fleet.names[int(options.spacecraft[other])], self.problem.antennas.names
        antenna = names[int(options.antenna[other])]
        if blocker.kind == "antenna_busy" and blocker.name != antenna:
            antenna = f"{antenna}, with {blocker.name} at the ready,"
        return f"{blocker.name} is taken: {craft} on {antenna} from {a} to {b} UTC"
