"""A run with everything it needs, read and checked; the only thing the floors above take from this one."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
import pandas as pd

from passplan.inputs.aboard import Slot
from passplan.inputs.bookings import Booking
from passplan.inputs.calendar_records import Closure, Request
from passplan.inputs.data import DataClass, only_class
from passplan.inputs.decisions import Decision, Published
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.ephemeris import Ephemeris
from passplan.inputs.fleet import CommandRadio, DownlinkRadio, Spacecraft
from passplan.inputs.generation import Series
from passplan.inputs.ground import Antenna, Receiver, Site, Transmitter
from passplan.inputs.modcods import ModcodTable
from passplan.inputs.mounts import Mount
from passplan.inputs.pfd import PfdLimit, builtin_pfd_limits
from passplan.inputs.policy import Policy
from passplan.inputs.reader import ReadFile

OrbitSource = ElementSet | Ephemeris


@dataclass(frozen=True)
class Run:
    """One planning run as checked.

    ``start_utc`` and ``end_utc`` bound the half-open horizon (``datetime64[ms]``, whole seconds).
    ``orbits`` maps each spacecraft that takes part to the source its orbit comes from; ``left_out``
    maps the others to the reason. ``data`` holds the classes of spacecraft that state any (see :meth:`data_of`),
    ``series`` the generation files by their names as written. ``elements`` is a table of every element set that was
    read for a spacecraft of the fleet, with the use made of it. ``modcod_tables`` is keyed by table name.
    """

    name: str
    start_utc: np.datetime64
    end_utc: np.datetime64
    spacecraft: Mapping[str, Spacecraft]
    radios: Mapping[str, DownlinkRadio | CommandRadio]
    sites: Mapping[str, Site]
    antennas: Mapping[str, Antenna]
    receivers: Mapping[str, Receiver]
    transmitters: Mapping[str, Transmitter]
    modcod_tables: Mapping[str, ModcodTable]
    closures: tuple[Closure, ...]
    requests: tuple[Request, ...]
    policy: Policy
    orbits: Mapping[str, OrbitSource]
    left_out: Mapping[str, str]
    elements: pd.DataFrame
    pfd_limits: tuple[PfdLimit, ...] = field(default_factory=builtin_pfd_limits)
    mounts: Mapping[str, Mount] = field(default_factory=dict)
    bookings: tuple[Booking, ...] = ()
    asking_utc: np.datetime64 | None = None
    data: Mapping[str, tuple[DataClass, ...]] = field(default_factory=dict)
    series: Mapping[str, Series] = field(default_factory=dict)
    decisions: tuple[Decision, ...] = ()
    published: tuple[Published, ...] = ()
    slots: tuple[Slot, ...] = ()
    loaded: tuple[Published, ...] = ()
    warnings: tuple[str, ...] = ()
    files: tuple[ReadFile, ...] = field(default=(), repr=False)

    @property
    def frozen_until_utc(self) -> np.datetime64 | None:
        """Published contacts that start before this instant are frozen; None where none are."""
        if self.policy.freeze_h is None or not self.published:
            return None
        return self.start_utc + np.timedelta64(round(self.policy.freeze_h * 3600e3), "ms")

    def mount_of(self, antenna: str) -> Mount | None:
        """The mechanics of an antenna, None where they do not limit it."""
        name = self.antennas[antenna].mount
        return None if name is None else self.mounts[name]

    def data_of(self, spacecraft: str) -> tuple[DataClass, ...]:
        """The classes of data of a spacecraft, what is worth most first; one made of its own keys if it states none."""
        return self.data.get(spacecraft) or (only_class(self.spacecraft[spacecraft]),)

    @property
    def now_utc(self) -> np.datetime64:
        """The moment at which time on rented antennas is asked for."""
        return self.start_utc if self.asking_utc is None else self.asking_utc

    @property
    def horizon_s(self) -> int:
        """Length of the horizon in whole seconds."""
        return int((self.end_utc - self.start_utc) / np.timedelta64(1, "s"))
