"""From windows and their links to options: what the plan may choose from, and why a window gives none."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd

from passplan.inputs.run import Run
from passplan.link.chains import chains_between
from passplan.link.choice import WindowLink
from passplan.planning.clock import Clock
from passplan.planning.cuts import Cuts, add_handovers, neighbour_cuts, spread
from passplan.planning.hooks import DRIFT_S, Block, Candidate, Cap, Silence, Standby, Wish
from passplan.planning.horizon import column_seconds
from passplan.planning.on_air import on_air_span
from passplan.planning.option_table import Options, build_options
from passplan.planning.price import price_of
from passplan.planning.problem import Antennas, Fleet, Windows
from passplan.planning.setup import SetupTimes
from passplan.planning.spans import without
from passplan.planning.standby import standby_candidates


@dataclass(frozen=True, eq=False)
class OptionSet:
    """Options with their ``candidates`` (same order), and why windows give none.

    ``excluded`` maps such a window to (reason, detail). ``blocked`` knows the time that no contact may touch, and
    ``shortened`` why no longer contact was to be had in a window, where it is neither that nor the link.
    """

    options: Options
    candidates: tuple[Candidate, ...]
    excluded: Mapping[int, tuple[str, str]]
    blocked: BlockedTime
    shortened: Mapping[int, str] = field(default_factory=dict)


class BlockedTime:
    """The blocks of every pair of spacecraft and antenna, with time to release before and to prepare after.

    Where that depends on the service the longest holds, as a block is there before it is known who comes beside it.
    """

    def __init__(self, blocks: Sequence[Block], setup: SetupTimes) -> None:
        self._of: dict[tuple[str | None, str | None], list[Block]] = {}
        for block in blocks:
            self._of.setdefault((block.spacecraft, block.antenna), []).append(block)
        self._setup = setup

    def between(self, craft: str, antenna: str, low_s: int, high_s: int) -> list[tuple[int, int, Block]]:
        """Blocks that touch [low_s, high_s), as (start, end, block) with the antenna's setup, in time order."""
        prepare_s, release_s = self._setup.longest(craft, antenna)
        found = []
        for key in ((craft, antenna), (craft, None), (None, antenna), (None, None)):
            for block in self._of.get(key, ()):
                a = block.start_s - (release_s if block.setup else 0)
                b = block.end_s + (prepare_s if block.setup else 0)
                if a < high_s and b > low_s:
                    found.append((a, b, block))
        return sorted(found, key=lambda entry: entry[:2])


def window_arrays(run: Run, windows: pd.DataFrame, fleet: Fleet, antennas: Antennas) -> Windows:
    """The windows table as arrays, in whole seconds from the start, rounded inward.

    A window of less than a second keeps its rounded start as its end.
    """
    craft = {name: k for k, name in enumerate(fleet.names)}
    antenna = {name: k for k, name in enumerate(antennas.names)}
    start_s = np.ceil(column_seconds(run, windows["aos_utc"]) - 1e-9).astype(np.int64)
    end_s = np.floor(column_seconds(run, windows["los_utc"]) + 1e-9).astype(np.int64)
    start_s = np.clip(start_s, 0, run.horizon_s)
    return Windows(
        names=tuple(windows["window_id"]),
        spacecraft=np.array([craft[name] for name in windows["spacecraft"]], dtype=np.int64),
        antenna=np.array([antenna[name] for name in windows["antenna"]], dtype=np.int64),
        start_s=start_s, end_s=np.clip(end_s, start_s, run.horizon_s))


def find_options(
    run: Run, windows: Windows, fleet: Fleet, antennas: Antennas, links: Sequence[WindowLink],
    blocks: Sequence[Block] = (), wishes: Sequence[Wish] = (), caps: Sequence[Cap] = (),
    silences: Sequence[Silence] = (), standbys: Sequence[Standby] = (), clock: Clock | None = None,
) -> OptionSet:
    """Options of all windows: whole, and parts cut where that may help, at most the policy's number each.

    Behind them come those with a second antenna at the ready. Windows that are reached after the time of ``clock`` give
    one option each, and what requests ask for.
    """
    setup = SetupTimes(run)
    blocked = BlockedTime(blocks, setup)
    builder = _Builder(run, windows, fleet, antennas, blocked, wishes, caps, silences, clock)
    cuts = neighbour_cuts(windows, [
        setup.longest(fleet.names[craft], antennas.names[antenna])
        for craft, antenna in zip(windows.spacecraft.tolist(), windows.antenna.tolist(), strict=True)])
    for wish in wishes:
        if wish.overlap_s and wish.spacecraft in fleet.names:
            craft = fleet.names.index(wish.spacecraft)
            add_handovers(cuts, windows, craft, wish.start_s, wish.end_s, wish.overlap_s)
    of_window: dict[int, list[Candidate]] = {}
    excluded: dict[int, tuple[str, str]] = {}
    for w, link in enumerate(links):
        found, reason = builder.of_window(w, link, cuts[w])
        of_window[w] = found
        if not found:
            excluded[w] = reason
    candidates = [c for found in of_window.values() for c in found]
    candidates += standby_candidates(
        standbys, windows, fleet.names, antennas.names, of_window, lambda w, a, b: builder.offered(w, links[w], a, b),
        builder.free)

    def held(c: Candidate) -> dict[str, Any]:
        prepare_s, release_s = setup.of(antennas.names[int(windows.antenna[c.window])], c)
        return {
            "window": c.window, "antenna": windows.antenna[c.window], "start_s": c.start_s, "end_s": c.end_s,
            "prepare_s": prepare_s, "release_s": release_s, "downlink": c.downlink is not None,
            "command": c.command is not None}

    rows = [{
        **held(c), "spacecraft": windows.spacecraft[c.window], "cost": sum(one.cost for one in (c, *c.further)),
        "pieces": [] if c.downlink is None else [
            (piece.start_s, piece.end_s, piece.rate_mbps / 8.0 * c.downlink.expectation)
            for piece in c.downlink.pieces],
        "further": [held(one) for one in c.further],
    } for c in candidates]
    return OptionSet(build_options(rows), tuple(candidates), excluded, blocked, builder.shortened)


class _Builder:
    def __init__(
        self, run: Run, windows: Windows, fleet: Fleet, antennas: Antennas, blocked: BlockedTime,
        wishes: Sequence[Wish], caps: Sequence[Cap], silences: Sequence[Silence], clock: Clock | None,
    ) -> None:
        self.clock = clock
        self.run, self.windows, self.policy, self.blocked = run, windows, run.policy, blocked
        self.shortest_s = math.ceil(run.policy.min_contact_s)
        self.craft_names, self.antenna_names = fleet.names, antennas.names
        self.asked: dict[str, list[Wish]] = {}
        for wish in wishes:
            self.asked.setdefault(wish.spacecraft, []).append(wish)
        self.caps = {cap.spacecraft: cap for cap in caps}
        self.shortened: dict[int, str] = {}
        self.silences = {silence.spacecraft: silence for silence in silences}

    def of_window(self, w: int, link: WindowLink, cuts: Cuts) -> tuple[list[Candidate], tuple[str, str]]:
        """The options of one window, longest first, or the reason why there are none."""
        start_s, end_s = int(self.windows.start_s[w]), int(self.windows.end_s[w])
        craft, antenna = self._names(w)
        blocks = self.blocked.between(craft, antenna, start_s, end_s)
        free = without((start_s, end_s), [(a, b) for a, b, _ in blocks])
        pieces = [p for p in free if p[1] - p[0] >= self.shortest_s]
        reason = self._unusable(w, link, pieces, [block for _, _, block in blocks])
        found = [] if reason else [c for low, high in pieces for c in self._of_piece(w, link, low, high, cuts)]
        cap = self.caps.get(craft)
        if cap is not None and found:
            found = [c for c in found if self._on_air_s(c) <= cap.longest_s]
            if not found:
                return [], (cap.reason, cap.detail)
        useful = [c for c in found if c.downlink is not None or self._commands_wanted(craft)]
        if not useful:
            silence = self.silences.get(craft)
            if silence is not None and not reason and link.downlink is not None and start_s < silence.until_s:
                return [], (silence.reason, silence.detail)
            if found:
                reason = ("not_needed", f"{antenna} can only command {craft} then, and no command contact is asked for")
            return [], reason or ("no_margin", "the margin does not hold long enough after acquisition")
        useful = self._undominated(useful, craft)
        asked = self._asked_of(w, pieces)
        most = self._most()
        kept = [c for k, c in enumerate(useful) if k < most or (c.start_s, c.end_s) in asked]
        return sorted(kept, key=lambda c: (c.start_s, c.end_s)), ("", "")

    def _most(self) -> int:
        """How many options a window may give: fewer when time runs out, so that there is some left to plan in."""
        late = self.clock is not None and self.clock.expired()
        return 1 if late else self.policy.options_per_window

    def offered(self, w: int, link: WindowLink, start_s: int, end_s: int) -> Candidate | None:
        """The contact of a window from ``start_s`` to ``end_s``, if it is one and its transmitter may be on so long."""
        candidate, cap = self._candidate(w, link, start_s, end_s), self.caps.get(self._names(w)[0])
        return None if candidate is None or (
            cap is not None and self._on_air_s(candidate) > cap.longest_s) else candidate

    def free(self, w: int, low: int, high: int) -> list[tuple[int, int]]:
        """The parts of [low, high), a part of a window, that are not closed and long enough for a contact."""
        blocks = self.blocked.between(*self._names(w), low, high)
        return [(a, b) for a, b in without((low, high), [(a, b) for a, b, _ in blocks]) if b - a >= self.shortest_s]

    def _unusable(
        self, w: int, link: WindowLink, pieces: Sequence[tuple[int, int]], blocks: Sequence[Block],
    ) -> tuple[str, str] | None:
        """Why no contact at all is possible in a window, if that can be seen before looking at the link."""
        craft, antenna = self._names(w)
        length_s = int(self.windows.end_s[w] - self.windows.start_s[w])
        if length_s < self.shortest_s:
            return "too_short", f"{length_s} s, less than the {self.shortest_s} s that a contact needs"
        if not pieces:
            longest = max(blocks, key=lambda block: block.end_s - block.start_s)
            return longest.reason, longest.detail
        if link.downlink is None and link.command is None:
            if chains_between(self.run, craft, antenna):
                return "no_margin", f"the margin never reaches {self.policy.required_margin_db:g} dB"
            return "no_radio", f"no radio of {craft} matches a receiver or transmitter of {antenna}"
        return None

    def _of_piece(self, w: int, link: WindowLink, low: int, high: int, cuts: Cuts) -> Iterator[Candidate]:
        """Candidates in a closure-free piece, the most useful first: whole, then one end cut, then both."""
        most = self._most()
        asked = self._asked_of(w, [(low, high)])
        must_start = {low} | {a for a, _ in asked} | {t for t in cuts.must_start if low < t < high}
        must_end = {high} | {b for _, b in asked} | {t for t in cuts.must_end if low < t < high}
        whole = self._candidate(w, link, low, high)
        if whole is not None and whole.downlink is not None:
            # Time in which nothing can be sent need not be held.
            radio = self.run.radios[whole.downlink.radio]
            must_start.add(max(low, math.floor(whole.downlink.send_start_s - radio.acquisition_s)))
            must_end.add(min(high, whole.downlink.send_end_s))
        grid_s = self.policy.cut_grid_s
        grid = range(-(-low // grid_s) * grid_s, high, grid_s) if grid_s else range(0)
        inner = math.isqrt(most - 1) + 1 if most > 1 else 0
        starts = must_start | set(spread(low, high - self.shortest_s + 1, cuts.starts, grid, inner))
        ends = must_end | set(spread(low + self.shortest_s - 1, high, cuts.ends, grid, inner))
        cap = self.caps.get(self._names(w)[0])
        longest_s = high - low
        if cap is not None and link.downlink is not None and cap.longest_s < longest_s:
            longest_s = cap.longest_s
            self.shortened[w] = cap.reason
            starts, ends = starts | {b - longest_s for b in ends}, ends | {a + longest_s for a in starts}
        pairs = [(a, b) for a in starts for b in ends if low <= a and b <= high and b - a >= self.shortest_s
                 and (b - a <= longest_s or (a in must_start and b in must_end))]
        pairs.sort(key=lambda p: ((p[0] not in must_start) + (p[1] not in must_end), p[0] - p[1], p[0]))
        for start_s, end_s in pairs[: most + len(must_start) * len(must_end) - 1]:
            candidate = whole if (start_s, end_s) == (low, high) else self._candidate(w, link, start_s, end_s)
            if candidate is not None:
                yield candidate

    def _asked_of(self, w: int, pieces: Sequence[tuple[int, int]]) -> set[tuple[int, int]]:
        """The contacts that somebody asked for, as far as they lie in free pieces of a window."""
        craft, antenna = self._names(w)
        spans = {(max(low, wish.start_s), min(high, wish.end_s)) for wish in self.asked.get(craft, ())
                 if wish.antenna in (None, antenna) for low, high in pieces}
        return {(a, b) for a, b in spans if b - a >= self.shortest_s}

    def _on_air_s(self, candidate: Candidate) -> int:
        start_s, end_s = on_air_span(self.run, candidate.start_s, candidate.downlink)
        return end_s - start_s

    def _silent(self, w: int, start_s: int, end_s: int) -> bool:
        """Whether the spacecraft must not send in a contact of a window."""
        craft, antenna = self._names(w)
        silence = self.silences.get(craft)
        if silence is None or start_s >= silence.until_s:
            return False
        self.shortened[w] = silence.reason
        low, high = int(self.windows.start_s[w]), int(self.windows.end_s[w])
        return not any(
            (antenna, start_s, end_s) == (name, max(low, a), min(high, b))
            and start_s <= max(a, 0) + DRIFT_S and end_s >= min(b, self.run.horizon_s) - DRIFT_S
            for name, a, b in silence.kept)

    def _candidate(self, w: int, link: WindowLink, start_s: int, end_s: int) -> Candidate | None:
        downlink = None
        if link.downlink is not None and not self._silent(w, start_s, end_s):
            downlink = link.downlink.best(start_s, end_s)
        command = link.command.best(start_s, end_s) if link.command is not None else None
        if command is not None and command.usable_s < self.policy.command_min_s:
            command = None
        if downlink is None and command is None:
            return None
        cost = price_of(self.run.antennas[self._names(w)[1]], end_s - start_s)
        return Candidate(w, start_s, end_s, downlink, command, cost)

    def _undominated(self, candidates: list[Candidate], craft: str) -> list[Candidate]:
        """Without options that hold more time than another and offer no more."""
        if craft in self.asked:
            return candidates
        counted = self._commands_wanted(craft)
        return [a for a in candidates
                if (counted and a.command is not None) or not any(_dominates(b, a) for b in candidates if b is not a)]

    def _commands_wanted(self, craft: str) -> bool:
        every_h = self.run.spacecraft[craft].command_every_h or self.policy.command_every_h
        return every_h is not None or craft in self.asked

    def _names(self, w: int) -> tuple[str, str]:
        return self.craft_names[int(self.windows.spacecraft[w])], self.antenna_names[int(self.windows.antenna[w])]


def _dominates(b: Candidate, a: Candidate) -> bool:
    """Whether ``b`` lies within ``a``, is strictly shorter, and sends and commands at least as much."""
    if b.start_s < a.start_s or b.end_s > a.end_s or b.end_s - b.start_s >= a.end_s - a.start_s:
        return False
    if a.command is not None and b.command is None:
        return False
    if a.downlink is None:
        return True
    return (b.downlink is not None and b.downlink.send_start_s <= a.downlink.send_start_s
            and b.downlink.send_end_s >= a.downlink.send_end_s
            and b.downlink.rate_mbps * b.downlink.expectation >= a.downlink.rate_mbps * a.downlink.expectation
            and b.downlink.usable_s >= a.downlink.usable_s)
