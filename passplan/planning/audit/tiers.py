"""Are the tiers of the plan what its contacts come to, each with its bound on the right side?"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from typing import Any

from passplan.inputs.run import Run
from passplan.planning.audit.changes import departures
from passplan.planning.audit.faults import Fault, differs
from passplan.planning.audit.rows import Contact

_RELATIVE = 1e-6


def check_tiers(run: Run, contacts: Sequence[Contact], summary: Mapping[str, Any]) -> Iterator[Fault]:
    """Value and bound of each tier that the summary states; storage figures and value are checked elsewhere."""
    stated = summary.get("tiers")
    if not isinstance(stated, Sequence):
        return
    storage = summary.get("storage", {})
    expected: dict[str, float] = {"value": _number(summary.get("value"))}
    if run.policy.tiers == "in_order":
        expected["lost data"] = math.fsum(_number(entry.get("lost_mb")) for entry in storage.values())
        expected["cost"] = math.fsum(contact.cost for contact in contacts)
        if run.published:
            expected["changes"] = float(departures(run, contacts)[1])
    named = {str(tier.get("name")): tier for tier in stated}
    for name in sorted(set(expected) - set(named)):
        yield Fault("tier", f"tier {name}", "the summary does not state it")
    for name, tier in named.items():
        figure, bound = _number(tier.get("value")), _number(tier.get("bound"))
        if name in expected and differs(figure, expected[name], _RELATIVE * max(1.0, abs(expected[name]))):
            yield Fault("tier", f"tier {name}", f"stated as {figure:.6f}, the audit finds {expected[name]:.6f}")
        short = bound - figure if tier.get("sense") == "most" else figure - bound
        if short < -_RELATIVE * max(1.0, abs(figure)):
            yield Fault("tier", f"tier {name}", f"its bound {bound:.6f} lies on the wrong side of {figure:.6f}")


def _number(value: Any) -> float:
    return float(value) if isinstance(value, int | float) and not isinstance(value, bool) else math.nan
