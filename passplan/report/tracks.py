"""Every window as a track: where the antenna points along it, and what the link allows."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.losses import merged
from passplan.inputs.run import Run
from passplan.link.allowed import allowed_mbps
from passplan.link.profiles import WindowLink, link_profiles
from passplan.planning.steps import losses_of, samples_of

Floats = NDArray[np.float64]
Spans = tuple[tuple[float, float], ...]


@dataclass(frozen=True, eq=False)
class WindowTrack:
    """One window sampled, arrays of shape (n,): seconds from the horizon's start, pointing and range.

    ``rate_mbps`` is the fastest net rate that holds the policy's margin, 0 where none does. ``keyholes``
    are spans in seconds in which the mount cannot follow; empty where nothing is known of its mechanics.
    """

    time_s: Floats
    azimuth_deg: Floats
    elevation_deg: Floats
    range_km: Floats
    rate_mbps: Floats
    link: WindowLink = field(repr=False)
    keyholes: Spans = ()

    def margin_db(self, radio: str, modcod: str) -> Floats | None:
        """Margin (n,) of one modcod of a radio (commands: of its bit rate); None where the link floor kept none."""
        downlink = self.link.downlink.tracks if self.link.downlink is not None else ()
        command = self.link.command.tracks if self.link.command is not None else ()
        for track in (*downlink, *command):
            for rung in track.chain.rungs:
                if track.chain.radio == radio and (rung.name == modcod or track in command):
                    return np.interp(self.time_s, track.time_s, track.quality_db) - rung.required_db
        return None

    def margin_in_force(
        self, radio: str, pieces: Sequence[tuple[float, float, str]], time_s: Floats
    ) -> tuple[Floats, Floats] | None:
        """Times and margin of the modcod in force along ``pieces`` (start and end in seconds, modcod).

        The first piece's modcod also counts before it and the last one's after it. ``time_s`` are the times to draw
        at; the edges of the pieces are added. None where the link floor kept no track.
        """
        times, margins = [], []
        for k, (low, high, modcod) in enumerate(pieces):
            margin = self.margin_db(radio, modcod)
            if margin is None:
                return None
            first = time_s[0] if k == 0 else low
            last = time_s[-1] if k == len(pieces) - 1 else high
            times.append(np.unique([first, low, *time_s[(time_s > first) & (time_s < last)], high, last]))
            margins.append(np.interp(times[-1], self.time_s, margin))
        return np.concatenate(times), np.concatenate(margins)


def window_tracks(run: Run, windows: pd.DataFrame) -> list[WindowTrack]:
    """The track of each window of the table, in its order, every 10 s from AOS and at LOS."""
    if windows.empty:
        return []
    samples, losses = samples_of(run, windows), losses_of(run, windows)
    links = link_profiles(run, windows, samples, losses)
    keyholes: dict[int, list[tuple[float, float]]] = {}
    for loss in losses.rows:
        if loss.cause == "keyhole":
            keyholes.setdefault(loss.window, []).append((loss.start_s, loss.end_s))
    tracks = []
    for i, link in enumerate(links):
        own = slice(int(samples.offsets[i]), int(samples.offsets[i + 1]))
        time_s = samples.time_s[own]
        sending = link.downlink.tracks if link.downlink is not None else ()
        tracks.append(
            WindowTrack(
                time_s,
                samples.azimuth_deg[own],
                samples.elevation_deg[own],
                samples.range_km[own],
                allowed_mbps(sending, time_s, run.policy.required_margin_db),
                link,
                merged(keyholes.get(i, ())),
            )
        )
    return tracks


def thinned(count: int, most: int) -> NDArray[np.int64]:
    """Indices of at most ``most`` of ``count`` samples, evenly spread, the first and the last among them."""
    return np.unique(np.linspace(0, count - 1, min(count, most)).round().astype(np.int64))
