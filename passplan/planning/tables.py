"""The plan as tables for the floors above: contacts and their segments."""

from __future__ import annotations

import numpy as np
import pandas as pd

from passplan.inputs.data import ONLY_CLASS
from passplan.inputs.run import Run
from passplan.planning.hooks import Candidate
from passplan.planning.horizon import instants_of
from passplan.planning.occupancy import Occupancy
from passplan.planning.options import OptionSet
from passplan.planning.problem import Problem
from passplan.planning.record import CONTACT_COLUMNS, SEGMENT_COLUMNS, STANDBY
from passplan.planning.result import PlanResult
from passplan.planning.rules.terms import Terms
from passplan.planning.value import Account


def contacts_table(
    run: Run, windows: pd.DataFrame, problem: Problem, option_set: OptionSet, terms: Terms, result: PlanResult,
) -> pd.DataFrame:
    """One row per contact in time order. ``volume_mb`` is what it brings down, ``value`` what that is worth, and
    ``weight`` what a MB of it is worth (of the best class where it brings nothing).

    The modcod, margin and usable time are those of the downlink where there is one, of the command link
    otherwise (then ``modcod`` is empty). A contact's id is its window's with ``.c1``, ``.c2`` ... in time order.
    One that stands by for another follows it, with what its link would give and no volume.
    """
    chosen, options = result.account.chosen, problem.options
    origins = _origins(terms)
    cutter = _CutExplainer(problem, option_set, terms, result)
    numbers: dict[int, int] = {}
    rows = []
    account = result.account
    for o, volume_mb, value in zip(
        chosen.tolist(), account.contact_mb.tolist(), account.contact_worth.tolist(), strict=True):
        craft = int(options.spacecraft[o])
        mixed = volume_mb > 0.0 and bool(account.classes[craft])
        weight = value / volume_mb if mixed else float(problem.fleet.weight[craft])
        candidate = option_set.candidates[o]
        for one in (candidate, *candidate.further):
            w, first = one.window, one is candidate
            numbers[w] = numbers.get(w, 0) + 1
            antenna = problem.antennas.names[int(problem.windows.antenna[w])]
            link = one.downlink or one.command
            if link is None:
                raise ValueError(f"option {o} offers no service")
            rows.append({
                "contact_id": f"{problem.windows.names[w]}.c{numbers[w]}", "window_id": problem.windows.names[w],
                "spacecraft": problem.fleet.names[craft], "antenna": antenna, "site": run.antennas[antenna].site,
                "service": one.service, "radio": link.radio, "frequency_mhz": link.frequency_mhz,
                "polarisation": link.polarisation, "start_utc": one.start_s, "end_utc": one.end_s,
                "duration_s": one.end_s - one.start_s, "usable_s": link.usable_s,
                "modcod": "" if one.downlink is None else one.downlink.modcod,
                "volume_mb": volume_mb if first else 0.0, "min_margin_db": link.min_margin_db,
                "peak_elevation_deg": float(windows["peak_elevation_deg"].iloc[w]),
                "weight": weight if first else float(problem.fleet.weight[craft]),
                "value": value if first else 0.0, "cost": one.cost,
                "origin": origins.get(o, "planned") if first else STANDBY, "change": "new",
                "cut": cutter.why(o) if first else _standby_cut(problem, one)})
    table = pd.DataFrame(rows, columns=list(CONTACT_COLUMNS))
    return _typed(table, run, texts=(
        "contact_id", "window_id", "spacecraft", "antenna", "site", "service", "radio", "polarisation", "modcod",
        "origin", "change", "cut"))


def _standby_cut(problem: Problem, one: Candidate) -> str:
    """A stand-by is there for as long as the contact that it stands by for."""
    w = one.window
    late, early = one.start_s > problem.windows.start_s[w], one.end_s < problem.windows.end_s[w]
    return "; ".join(word for word, short in (("start: standby", late), ("end: standby", early)) if short)


def _origins(terms: Terms) -> dict[int, str]:
    """Who wanted each option; where several did, the one that outranks the others."""
    handing_over = {int(o): "requested" for need in terms.recurrences if need.request for o in need.options}
    words = {"request": "requested", "pin": "pinned", "frozen": "frozen", "loaded": "frozen",
             "emergency": "emergency"}
    wanted = sorted(terms.wanted, key=lambda want: list(words).index(want.kind))
    return {**handing_over, **{int(o): words[want.kind] for want in wanted for o in want.options}}


def segments_table(
    run: Run, problem: Problem, option_set: OptionSet, result: PlanResult, contacts: pd.DataFrame,
) -> pd.DataFrame:
    """One row per piece of sending and class of data in it, in the order of the contacts.

    ``volume_mb`` is what it brings down. A piece that brings down nothing has one row.
    """
    options, account = problem.options, result.account
    counts = np.diff(options.piece_offset)[account.chosen]
    owner = np.repeat(np.arange(len(account.chosen)), counts)
    first = options.piece_offset[account.chosen[owner]]
    modcods = [_modcod_of(option_set.candidates[o], int(k))
               for o, k in zip(account.chosen[owner].tolist(), account.piece - first, strict=True)]
    table = pd.DataFrame({
        "contact_id": contacts.loc[contacts["origin"] != STANDBY, "contact_id"].to_numpy()[owner],
        "start_utc": options.piece_start_s[account.piece], "end_utc": options.piece_end_s[account.piece],
        "modcod": modcods, "rate_mbps": options.piece_rate_mb_per_s[account.piece] * 8.0})
    table["data_class"], table["volume_mb"] = _by_class(problem, account)
    table = table.explode(["data_class", "volume_mb"], ignore_index=True)[list(SEGMENT_COLUMNS)]
    return _typed(table, run, texts=("contact_id", "modcod", "data_class"))


def _by_class(problem: Problem, account: Account) -> tuple[pd.Series, pd.Series]:
    """For each piece the classes it carries and how much of each, as lists."""
    names, volumes = [], []
    for p, volume_mb in zip(account.piece.tolist(), account.piece_mb.tolist(), strict=True):
        if p in account.class_mb:
            craft = int(problem.options.spacecraft[np.searchsorted(problem.options.piece_offset, p, side="right") - 1])
            carried = [(one.name, float(mb)) for one, mb in zip(
                account.classes[craft], account.class_mb[p], strict=True)]
            some = [pair for pair in carried if pair[1] > 0.0] or carried[:1]
        else:
            some = [(ONLY_CLASS, volume_mb)]
        names.append([name for name, _ in some])
        volumes.append([mb for _, mb in some])
    return pd.Series(names, dtype=object), pd.Series(volumes, dtype=object)


def _modcod_of(candidate: Candidate, piece: int) -> str:
    return "" if candidate.downlink is None else candidate.downlink.pieces[piece].modcod


class _CutExplainer:
    """Says why a contact is shorter than its window, in the reason words of the unused windows."""

    def __init__(self, problem: Problem, option_set: OptionSet, terms: Terms, result: PlanResult) -> None:
        self.problem, self.option_set = problem, option_set
        self.occupancy = Occupancy(terms, len(problem.options))
        for o in result.chosen:
            self.occupancy.add(o)
        self.of_window: dict[int, list[int]] = {}
        for o, w in enumerate(problem.options.window.tolist()):
            self.of_window.setdefault(w, []).append(o)

    def why(self, option: int) -> str:
        """A reason for a late start and one for an early end; empty for a whole window."""
        options, windows = self.problem.options, self.problem.windows
        w = int(options.window[option])
        start_s, end_s = int(options.start_s[option]), int(options.end_s[option])
        siblings = self.of_window[w]
        self.occupancy.remove(option)
        reasons = []
        if start_s > windows.start_s[w]:
            longer = [o for o in siblings if options.start_s[o] < start_s < options.end_s[o]]
            reasons.append(f"start: {self._side(option, longer, int(windows.start_s[w]), start_s)}")
        if end_s < windows.end_s[w]:
            longer = [o for o in siblings if options.end_s[o] > end_s > options.start_s[o]]
            reasons.append(f"end: {self._side(option, longer, end_s, int(windows.end_s[w]))}")
        self.occupancy.add(option)
        return "; ".join(reasons)

    def _side(self, option: int, longer: list[int], low_s: int, high_s: int) -> str:
        options, w = self.problem.options, int(self.problem.options.window[option])
        shortened = self.option_set.shortened.get(w)
        if shortened is not None and not any(
            options.start_s[o] <= options.start_s[option] and options.end_s[o] >= options.end_s[option] for o in longer
        ):
            return shortened
        for o in longer:
            for blocker in self.occupancy.blockers(o):
                return blocker.kind
        if longer:
            return "nothing_aboard"
        craft = self.problem.fleet.names[int(options.spacecraft[option])]
        antenna = self.problem.antennas.names[int(options.antenna[option])]
        blocks = self.option_set.blocked.between(craft, antenna, low_s, high_s)
        return blocks[0][2].reason if blocks else "no_margin"


def _typed(table: pd.DataFrame, run: Run, texts: tuple[str, ...]) -> pd.DataFrame:
    """Seconds become instants, and columns keep their types when there is no row."""
    for column in ("start_utc", "end_utc"):
        table[column] = instants_of(run, table[column].to_numpy(dtype=np.int64))
    for column in table.columns:
        if column in texts:
            table[column] = table[column].astype("object")
        elif column not in ("start_utc", "end_utc"):
            table[column] = table[column].astype("int64" if column.endswith("_s") else "float64")
    return table
