"""Power flux density at the ground, for ``passplan check`` and in the report of a plan: a flag, not a verdict."""

from __future__ import annotations

from collections.abc import Sequence

from rich.console import Group, RenderableType
from rich.text import Text

from passplan.inputs.run import Run
from passplan.link.ground_flux import WorstFlux, worst_fluxes
from passplan.planning.ground_flux import STATEMENT
from passplan.planning.record import PlanRecord
from passplan.report.contact_table import plain_table

_ROWS = 12


def flux_of_run(run: Run) -> tuple[list[WorstFlux], RenderableType]:
    """The radios that could exceed a limit somewhere, and the table of the nearest to their limits."""
    found = sorted(worst_fluxes(run), key=lambda entry: (-entry.excess_db, entry.spacecraft, entry.radio))
    over = [entry for entry in found if entry.excess_db > 0.0]
    if not found:
        return over, Text("No limit of power flux density is stated for the radios of this run.", style="dim")
    table = plain_table(
        ("flux density at the ground", "left"), ("radio", "left"), ("worst at", "right"), ("dBW/m2", "right"),
        ("limit", "right"), ("dB over", "right"))
    shown = found[: max(_ROWS, len(over))]
    for entry in shown:
        table.add_row(
            entry.spacecraft, entry.radio, f"{entry.arrival_deg:g}°",
            f"{entry.density_dbw_per_m2:.1f} in {entry.unit.removeprefix('dBW/m2/')}", f"{entry.limit_dbw_per_m2:.1f}",
            Text(f"{entry.excess_db:+.1f}", style="bold yellow" if entry.excess_db > 0.0 else ""))
    lines = [f"{len(found) - len(shown)} more are farther below their limits."] if len(shown) < len(found) else []
    lines += [f"Limits: {source}." for source in dict.fromkeys(entry.source for entry in found)]
    lines.append(f"From the lowest point of each orbit, at the worst angle of arrival; {STATEMENT}.")
    return over, Group(table, *(Text(line, style="dim") for line in lines))


def flux_warning(entry: WorstFlux) -> str:
    """What ``check`` says of a radio that could exceed its limit."""
    return (f"{entry.spacecraft}: radio {entry.radio} could put {entry.excess_db:.1f} dB more than the limit on the "
            f"ground at {entry.arrival_deg:g} deg ({entry.source})")


def flux_of_plan(record: PlanRecord) -> RenderableType | None:
    """The contacts that come nearest to their limits, by spacecraft and radio; None where none has a limit."""
    flux = record.summary.get("flux_density", {})
    known = flux.get("contacts", {})
    contacts = [row for row in record.contacts.to_dict("records") if row["contact_id"] in known]
    if not contacts:
        return None
    groups: dict[tuple[str, str], list[str]] = {}
    for row in contacts:
        groups.setdefault((row["spacecraft"], row["radio"]), []).append(row["contact_id"])
    table = plain_table(
        ("spacecraft", "left"), ("radio", "left"), ("contacts", "right"), ("over", "right"), ("dB over", "right"),
        ("at", "right"))
    for (craft, radio), names in sorted(groups.items(), key=lambda item: -_worst(known, item[1])["excess_db"]):
        worst, over = _worst(known, names), sum(known[name]["excess_db"] > 0.0 for name in names)
        table.add_row(
            craft, radio, f"{len(names)}", f"{over}" if over else "",
            Text(f"{worst['excess_db']:+.1f}", style="bold yellow" if over else ""), f"{worst['elevation_deg']:.0f}°")
    sources = dict.fromkeys(entry["source"] for entry in known.values())
    return Group(table, *(Text(f"Limits: {source}.", style="dim") for source in sources),
                 Text(f"Towards the station; {flux['statement']}.", style="dim"))


def _worst(known: dict[str, dict[str, float]], names: Sequence[str]) -> dict[str, float]:
    return max((known[name] for name in names), key=lambda entry: entry["excess_db"])
