"""Contacts that follow a spacecraft without a break: from hand to hand, is there always one in time?"""

from __future__ import annotations

from collections.abc import Sequence

from passplan.planning.audit.rows import Contact
from passplan.planning.audit.standing import Standing


def handed_over(
    contacts: Sequence[Contact], from_s: float, until_s: float, overlap_s: float, in_run: bool,
) -> Standing:
    """Whether some of ``contacts``, of one spacecraft, lead from ``from_s`` to ``until_s``.

    The first has begun by ``from_s``. Of those that begin ``overlap_s`` before the end of the one at hand, that
    which lasts longest takes over, until ``until_s`` is reached. A span no longer than the overlap, what the horizon
    shows of it, asks for nothing.
    """
    if until_s - from_s <= overlap_s and in_run:
        return Standing(False, True, "")
    reached_s, begun_by_s = from_s, from_s
    while reached_s < until_s:
        ends = [contact.end_s for contact in contacts if contact.start_s <= begun_by_s and contact.end_s > reached_s]
        if not ends:
            sentence = f"no contact takes over with {overlap_s:g} s of overlap before {reached_s:.0f} s of the horizon"
            return Standing(True, False, sentence)
        reached_s = max(ends)
        begun_by_s = reached_s - overlap_s
    return Standing(False, True, "")
