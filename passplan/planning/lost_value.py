"""Why data was not brought down: what was lost aboard, and what is left at the end, by cause.

The rule, plainly (own derivation). Each spacecraft's storage is followed once more with every link in use that the
plan leaves unused: at each instant the fastest one in view (of a spacecraft with N links: the N fastest) sends what it
would carry beyond what the plan sends, as far as there is data aboard that no contact of the plan takes later. So
every contact still brings down what it did. What such a link saves, first sent first, is taken off the next loss, or
else off what is left at the end, and is charged to the cause why that link is not used. What no link could have saved
is charged to ``no_window``. Nothing is counted twice.

The causes are the reasons of ``unused.csv`` (for windows cut short: those of the ``cut`` column), and two more:
``in_contact``, what the links of the contacts allow but acquisition, keyholes and the radio's rate control leave
unsent, and ``no_window``. A window without margin counts at the slowest rate of its radio, and one that would find
nothing more aboard (``nothing_aboard``) not at all. It is an account of this plan and no promise of a better one: the
links that are missed by one spacecraft may be those that serve another.
"""

from __future__ import annotations

import re
from collections import defaultdict, deque
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from passplan.inputs.run import Run
from passplan.link.allowed import allowed_mbps
from passplan.link.chains import chains_between
from passplan.link.choice import WindowLink
from passplan.planning.arrays import Floats, Integers
from passplan.planning.backlog import Backlog, backlogs
from passplan.planning.horizon import column_seconds
from passplan.planning.record import STANDBY, PlanRecord, sending

IN_CONTACT, NO_WINDOW = "in_contact", "no_window"
_CUT = re.compile(r"(start|end): (\w+)")


@dataclass(frozen=True, eq=False)
class Chance:
    """What one window allows: steps from ``time_s`` (n,) on at ``rate_mbps`` (n,), and spans with their causes."""

    time_s: Floats
    rate_mbps: Floats
    spans: tuple[tuple[float, float, str], ...]


@dataclass(frozen=True, eq=False)
class Missed:
    """The links that a spacecraft leaves unused: cells between ``edge_s`` (n + 1,), what each could carry more
    (``extra_mb``, (n,)), the number of the cause in ``causes``, and what is sent (``sent_mbps``)."""

    edge_s: Floats
    extra_mb: Floats
    cause: Integers
    sent_mbps: Floats
    causes: tuple[str, ...]


def lost_value(run: Run, record: PlanRecord, links: Sequence[WindowLink]) -> dict[str, dict[str, dict[str, float]]]:
    """The entry ``lost_value`` of ``plan.json``: by spacecraft and cause ``lost_mb, lost_value, left_mb, left_value``.

    ``links`` are those of the windows, in order. Values are MB times weight (the mean of a spacecraft's classes), but
    without the cost of spilling. Over the causes the figures add up to the spacecraft's ``lost_mb`` and ``left_mb``.
    """
    chances = _chances(run, record, links)
    names = record.contacts.set_index("contact_id")["spacecraft"]
    pieces = sending(record.segments)
    owners = pieces["contact_id"].map(names).to_numpy()
    sent = np.column_stack([column_seconds(run, pieces["start_utc"]), column_seconds(run, pieces["end_utc"]),
                            pieces["rate_mbps"].to_numpy(float)])
    found = {}
    for name, store in backlogs(record).items():
        figures = record.summary["storage"][name]
        weights = [_weight_of(record, name, key) for key in ("lost_mb", "left_mb")]
        missed = missed_links(store, chances.get(name, ()), sent[owners == name], run.spacecraft[name].links)
        shares = share_out(store, missed, figures["generated_mb"], figures["lost_mb"], figures["left_mb"])
        found[name] = {
            cause: {"lost_mb": lost, "lost_value": weights[0] * lost, "left_mb": left, "left_value": weights[1] * left}
            for cause, (lost, left) in sorted(shares.items())
        }
    return found


def _weight_of(record: PlanRecord, name: str, key: str) -> float:
    """What a MB of the figure ``key`` of a spacecraft is worth, over its classes of data."""
    classes = record.summary["storage"][name].get("classes", {}).values()
    total = sum(one[key] for one in classes)
    if total <= 0.0:
        return float(record.summary["spacecraft"][name]["weight"])
    return float(sum(one["weight"] * one[key] for one in classes) / total)


def missed_links(store: Backlog, chances: Iterable[Chance], sent: Floats, links: int = 1) -> Missed:
    """What the fastest ``links`` in view would carry beyond what is sent; rows of ``sent``: from, to, Mbit/s.

    It is charged to the cause of the fastest of them that is not in contact, if there is one.
    """
    chances = tuple(chances)
    edges = [store.time_s, sent[:, :2].ravel(), *(np.clip(c.time_s, 0.0, store.time_s[-1]) for c in chances),
             np.array([edge for c in chances for span in c.spans for edge in span[:2]], float)]
    edge_s = np.unique(np.clip(np.concatenate(edges), 0.0, store.time_s[-1]))
    sending = np.zeros(edge_s.size - 1)
    for first, last, rate in sent.tolist():
        sending[slice(*np.searchsorted(edge_s, (first, last)))] += rate
    best, cause = np.zeros((links, sending.size)), np.zeros((links, sending.size), np.int64)
    causes = tuple(dict.fromkeys(word for c in chances for *_, word in c.spans))
    for chance in chances:
        for first, last, word in chance.spans:
            cells = np.arange(*np.searchsorted(edge_s, (first, last)))
            step = np.searchsorted(chance.time_s, edge_s[cells], "right") - 1
            rate = chance.rate_mbps[np.maximum(step, 0)]
            number = np.full(cells.size, causes.index(word))
            # Each link takes the place of a slower one, which goes down a place itself.
            for place in range(links):
                better = rate > best[place, cells]
                at = cells[better]
                rate[better], best[place, at] = best[place, at], rate[better]
                number[better], cause[place, at] = cause[place, at], number[better]
    extra_mb = np.maximum(best.sum(axis=0) - sending, 0.0) * np.diff(edge_s) / 8.0
    unused = (best > 0.0) & (cause != (causes.index(IN_CONTACT) if IN_CONTACT in causes else -1))
    return Missed(edge_s, extra_mb, cause[np.argmax(unused, axis=0), np.arange(sending.size)], sending, causes)


def share_out(
    store: Backlog, missed: Missed, generated_mb: float, lost_mb: float, left_mb: float
) -> dict[str, tuple[float, float]]:
    """MB lost and MB left by cause, as the module says; they add up to ``lost_mb`` and ``left_mb``."""
    spilled = _spilled(store, missed, generated_mb, lost_mb)
    # What is sent early is missing at every later instant until a spill makes up for it, and must not be needed there.
    so_far = np.cumsum(spilled)
    spare = np.minimum.accumulate((store.at(missed.edge_s[1:]) + so_far)[::-1])[::-1] - so_far
    owed: deque[tuple[int, float]] = deque()
    missing = 0.0
    lost, left = np.zeros(len(missed.causes)), np.zeros(len(missed.causes))
    for i in np.flatnonzero((missed.extra_mb > 0.0) | (spilled > 0.0)).tolist():
        part = min(float(missed.extra_mb[i]), float(spare[i] + spilled[i]) - missing)
        if part > 0.0:
            owed.append((int(missed.cause[i]), part))
            missing += part
        saved = min(float(spilled[i]), missing)
        missing -= saved
        while saved > 0.0 and owed:
            cause, amount = owed.popleft()
            paid = min(amount, saved)
            lost[cause] += paid
            saved -= paid
            if amount > paid:
                owed.appendleft((cause, amount - paid))
    for cause, amount in owed:
        left[cause] += amount
    shares = {word: (float(lost[k]), float(left[k])) for k, word in enumerate(missed.causes) if lost[k] + left[k] > 0.0}
    # Not negative but for rounding: more than was spilled or kept is never saved.
    rest = (lost_mb - float(lost.sum()), left_mb - float(left.sum()))
    return {**shares, NO_WINDOW: rest} if any(rest) else shares


def _spilled(store: Backlog, missed: Missed, generated_mb: float, lost_mb: float) -> Floats:
    """MB lost in each cell; they add up to ``lost_mb``."""
    width_s = np.diff(missed.edge_s)
    gain_mb = np.maximum(generated_mb / float(store.time_s[-1]) - missed.sent_mbps / 8.0, 0.0) * width_s
    spilled = np.zeros(width_s.size)
    for first, last in store.losing_s:
        cells = slice(*np.searchsorted(missed.edge_s, (first, last)))
        spilled[cells] = gain_mb[cells]
    total = float(spilled.sum())
    return spilled * (lost_mb / total) if total > 0.0 else spilled


def _chances(run: Run, record: PlanRecord, links: Sequence[WindowLink]) -> Mapping[str, list[Chance]]:
    """The chances of each spacecraft: every window with a downlink, or with none for want of margin."""
    why = dict(zip(record.unused["window_id"], record.unused["reason"], strict=True))
    contacts = record.contacts.assign(
        first=column_seconds(run, record.contacts["start_utc"]), last=column_seconds(run, record.contacts["end_utc"]))
    used = {str(name): own for name, own in contacts.groupby("window_id")}
    found: dict[str, list[Chance]] = defaultdict(list)
    windows = record.windows
    rows = zip(
        windows["window_id"], windows["spacecraft"], windows["antenna"], column_seconds(run, windows["aos_utc"]),
        column_seconds(run, windows["los_utc"]), links, strict=True)
    for name, craft, antenna, aos_s, los_s, link in rows:
        spans = ((aos_s, los_s, str(why[name])),) if name in why else tuple(_parts(used[name], aos_s, los_s))
        weak = [span for span in spans if span[2] == "no_margin"]
        strong = tuple(span for span in spans if span[2] not in ("no_margin", "nothing_aboard"))
        if link.downlink is not None:
            time_s = link.downlink.tracks[0].time_s
            rate = allowed_mbps(link.downlink.tracks, time_s, run.policy.required_margin_db)
            found[craft].append(Chance(time_s, rate, strong))
        if weak:
            slowest = _slowest_mbps(run, craft, antenna)
            found[craft].append(Chance(np.array([aos_s]), np.array([slowest]), tuple(weak)))
    return found


def _parts(contacts: pd.DataFrame, aos_s: float, los_s: float) -> Iterable[tuple[float, float, str]]:
    """A used window in parts: its contacts, and what they leave of it with why they do."""
    clock, after = aos_s, IN_CONTACT
    for row in contacts.sort_values("first").to_dict("records"):
        cut = dict(_CUT.findall(row["cut"]))
        yield clock, row["first"], cut.get("start", after)
        yield row["first"], row["last"], STANDBY if row["origin"] == STANDBY else IN_CONTACT
        clock, after = row["last"], cut.get("end", IN_CONTACT)
    yield clock, los_s, after


def _slowest_mbps(run: Run, craft: str, antenna: str) -> float:
    """The slowest rate of any downlink between the two; 0 where there is none."""
    chains = [chain for chain in chains_between(run, craft, antenna) if chain.direction == "downlink"]
    return min((chain.rungs[-1].rate_mbps for chain in chains if chain.rungs), default=0.0)
