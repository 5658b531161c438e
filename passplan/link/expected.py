"""What a contact brings down over a year's weather: the expectation and three quantiles.

The attenuation exceeded for p % of an average year (P.618 with P.840 and P.836) is taken as the state of the
sky in the p-th hundredth of the year, worst first; one state holds for the whole contact. A radio that adapts
its rate follows the sky; any other sends the modcod that was planned, as long as it holds the policy's margin.
These are long-term statistics, not a forecast; a rain rate stated for the day does not enter.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from passplan.geometry.losses import Losses
from passplan.geometry.pointing import Samples
from passplan.inputs.run import Run
from passplan.link.budget import Floats
from passplan.link.choice import DownlinkChoice, DownlinkProfile, WindowLink
from passplan.link.profiles import link_profiles

PERCENT_NODES = (0.01, 0.1, 0.3, 1.0, 3.0, 10.0, 30.0, 50.0, 70.0, 90.0, 99.0)
"""Shares of the year at which the distribution is evaluated; a node stands for the year up to halfway to the next."""


@dataclass(frozen=True)
class PlannedContact:
    """One downlink contact: the row of its window, its seconds from the horizon's start, and how it was to send.

    A radio that adapts its rate makes its own choice; for any other ``modcod`` and its net rate count.
    """

    window: int
    start_s: int
    end_s: int
    radio: str
    modcod: str
    rate_mbps: float


@dataclass(frozen=True)
class ExpectedVolume:
    """Net user data [MB] that the link carries over the year: mean, quantiles, and the least and greatest."""

    mean_mb: float
    p10_mb: float
    p50_mb: float
    p90_mb: float
    least_mb: float
    greatest_mb: float


def expected_volumes(
    run: Run, windows: pd.DataFrame, samples: Samples, contacts: Sequence[PlannedContact],
    losses: Losses | None = None,
) -> list[ExpectedVolume]:
    """One entry for each contact, in order; ``samples`` and ``losses`` are those of ``windows``.

    Volumes are those of the link, whatever is aboard. P10 is the volume that a tenth of the year does not reach.
    """
    if not contacts:
        return []
    rows = sorted({contact.window for contact in contacts})
    place = {row: k for k, row in enumerate(rows)}
    own_windows, own_samples = windows.iloc[rows].reset_index(drop=True), _take(samples, rows)
    lost = () if losses is None else losses.rows
    own_losses = Losses(tuple(replace(loss, window=place[loss.window]) for loss in lost if loss.window in place))
    volumes_mb = np.zeros((len(contacts), len(PERCENT_NODES)))
    for k, percent in enumerate(PERCENT_NODES):
        links = link_profiles(under_percent(run, percent), own_windows, own_samples, own_losses)
        for c, contact in enumerate(contacts):
            volumes_mb[c, k] = carried_mb(links[place[contact.window]].downlink, contact)
    return [_summary(row) for row in volumes_mb]


@dataclass(frozen=True, eq=False)
class ExpectedProfile(DownlinkProfile):
    """A downlink that also says what each of its choices carries on average over the year.

    Modcods are those of the policy's unavailability; ``skies`` are the profiles at ``PERCENT_NODES``, None where
    the link never holds.
    """

    skies: tuple[DownlinkProfile | None, ...] = ()

    def best(self, start_s: int, end_s: int) -> DownlinkChoice | None:
        """As :meth:`DownlinkProfile.best`, with the ``expectation`` of the whole contact."""
        choice = super().best(start_s, end_s)
        if choice is None:
            return None
        contact = PlannedContact(0, start_s, end_s, choice.radio, choice.modcod, choice.rate_mbps)
        mean_mb = _summary(np.array([carried_mb(sky, contact) for sky in self.skies])).mean_mb
        return replace(choice, expectation=mean_mb / choice.volume_mb)


def expecting(
    run: Run, windows: pd.DataFrame, samples: Samples, links: Sequence[WindowLink], losses: Losses | None = None
) -> list[WindowLink]:
    """The ``links`` of ``windows`` with downlinks that know their expectation, by the same samples and losses."""
    years = [link_profiles(under_percent(run, percent), windows, samples, losses) for percent in PERCENT_NODES]
    return [
        link if link.downlink is None else replace(link, downlink=ExpectedProfile(
            link.downlink.tracks, tuple(year[row].downlink for year in years)))
        for row, link in enumerate(links)
    ]


def under_percent(run: Run, percent: float) -> Run:
    """The run under the attenuation that is exceeded for ``percent`` of an average year, and no rain of the day."""
    sites = {name: site.model_copy(update={"rain_rate_mm_per_h": None}) for name, site in run.sites.items()}
    policy = run.policy.model_copy(update={"unavailability_percent": percent})
    return replace(run, sites=sites, policy=policy)


def carried_mb(profile: DownlinkProfile | None, contact: PlannedContact) -> float:
    """What the link of a contact carries [MB] under the sky of ``profile``."""
    if profile is None:
        return 0.0
    tracks = tuple(track for track in profile.tracks if track.chain.radio == contact.radio)
    if any(track.chain.control.kind == "adaptive" for track in tracks):
        best = DownlinkProfile(tracks).best(contact.start_s, contact.end_s)
        return 0.0 if best is None else best.volume_mb
    longest_s = 0
    for track in tracks:
        for rung, first_s, last_s in zip(
            track.rung.tolist(), track.first_s.tolist(), track.last_s.tolist(), strict=True
        ):
            if track.chain.rungs[rung].name == contact.modcod:
                spans = track.spans(max(first_s, contact.start_s), min(last_s, contact.end_s))
                longest_s = max(longest_s, sum(end - begin for begin, end in spans))
    return contact.rate_mbps * longest_s / 8.0


def node_weights() -> Floats:
    """The share of the year that each node stands for; they add up to 1."""
    nodes = np.array(PERCENT_NODES)
    edges = np.concatenate(([0.0], (nodes[1:] + nodes[:-1]) / 2.0, [100.0]))
    return np.asarray(np.diff(edges) / 100.0)


def _summary(volumes_mb: Floats) -> ExpectedVolume:
    # The better the sky, the more comes down; sorting only mends what the models' joints leave uneven.
    sorted_mb = np.sort(volumes_mb)
    p10, p50, p90 = (float(value) for value in np.interp((10.0, 50.0, 90.0), PERCENT_NODES, sorted_mb))
    least, greatest = float(sorted_mb[0]), float(sorted_mb[-1])
    mean = min(max(float(node_weights() @ sorted_mb), least), greatest)
    return ExpectedVolume(mean, p10, p50, p90, least, greatest)


def _take(samples: Samples, rows: Sequence[int]) -> Samples:
    """The samples of some windows, end to end."""
    sizes = [int(samples.offsets[row + 1] - samples.offsets[row]) for row in rows]
    pick = np.concatenate([np.arange(samples.offsets[row], samples.offsets[row + 1]) for row in rows])
    return Samples(
        samples.time_s[pick], samples.azimuth_deg[pick], samples.elevation_deg[pick], samples.range_km[pick],
        samples.range_rate_km_s[pick], np.concatenate(([0], np.cumsum(sizes))).astype(np.int64),
    )
