"""Where closures come from, and which antennas a closure's wording means."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from pathlib import Path

from passplan.inputs.calendar_records import Closure
from passplan.inputs.errors import Findings, nearest
from passplan.inputs.ground import Antenna


@dataclass(frozen=True)
class ClosureSource:
    """A file of closures, and the antenna or site it is about if the file does not say so itself."""

    path: Path
    antenna: str | None = None
    site: str | None = None


@dataclass(frozen=True)
class PlacedClosure:
    """A closure with the file and the row or event it was read from."""

    closure: Closure
    file: Path
    where: str

    def __str__(self) -> str:
        return f"{self.file}: {self.where}"


@dataclass(frozen=True)
class Antennas:
    """The antennas of a run, found by their own name or their site's, upper and lower case alike."""

    by_name: Mapping[str, Antenna]

    def named(self, name: str) -> tuple[str, ...]:
        """The antenna of that name, or all antennas of the site of that name; empty if there is neither."""
        wanted = name.strip().casefold()
        own = tuple(antenna for antenna in self.by_name if antenna.casefold() == wanted)
        return own or self.at_site(name)

    def at_site(self, site: str) -> tuple[str, ...]:
        """The names of all antennas at ``site``."""
        wanted = site.strip().casefold()
        return tuple(name for name, antenna in self.by_name.items() if antenna.site.casefold() == wanted)

    def of_source(self, source: ClosureSource, findings: Findings) -> tuple[str, ...] | None:
        """What the source itself names: () if nothing, None with a problem noted if it names what is not there."""
        if source.antenna is not None:
            found = tuple(name for name in self.named(source.antenna) if name.casefold() == source.antenna.casefold())
            if not found:
                findings.problem(
                    source.path, "antenna", source.antenna, f"no such antenna; {nearest(source.antenna, self.by_name)}"
                )
            return found or None
        if source.site is not None:
            found = self.at_site(source.site)
            if not found:
                findings.problem(
                    source.path, "site", source.site, f"no antenna stands there; {nearest(source.site, self.sites)}"
                )
            return found or None
        return ()

    def narrowed(self, names: Iterable[str], outer: tuple[str, ...]) -> tuple[str, ...]:
        """The antennas that ``names`` mean; those of the source (``outer``) bound them if it names any.

        A station's calendar may cover the whole site in one event and single antennas in others. A name
        that means nothing, or an antenna elsewhere, does not widen what the source says.
        """
        meant = tuple(dict.fromkeys(antenna for name in names for antenna in self.named(name)))
        if not outer:
            return meant
        return tuple(name for name in meant if name in outer) or outer

    @property
    def sites(self) -> frozenset[str]:
        """The names of the sites with antennas."""
        return frozenset(antenna.site for antenna in self.by_name.values())

    def remedy(self, name: str) -> str:
        """What to write in place of a name that means no antenna and no site."""
        return nearest(name, {*self.by_name, *self.sites})
