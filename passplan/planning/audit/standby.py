"""Stand-bys: each is held beside a contact of its spacecraft, on another antenna, and could take over."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from passplan.inputs.fleet import DownlinkRadio
from passplan.inputs.run import Run
from passplan.planning.audit.faults import Fault
from passplan.planning.audit.quality import downlink_quality
from passplan.planning.audit.rows import Contact
from passplan.planning.audit.sky import Sight

_TOLERANCE_DB = 0.1
_TOLERANCE_S = 2.0
_SAME_S = 1e-3


def check_standbys(contacts: Sequence[Contact]) -> Iterator[Fault]:
    """Every stand-by has its contact, and brings nothing down itself."""
    for spare in contacts:
        if not spare.standby:
            continue
        if spare.pieces or spare.volume_mb != 0.0:
            yield Fault("standby", spare.place, "it stands by, yet it claims to bring data down")
        beside = [c for c in contacts if not c.standby and _together(c, spare)]
        if not beside:
            yield Fault("standby", spare.place, f"it stands by for no contact of {spare.spacecraft} of the same time")
        elif all(c.antenna == spare.antenna for c in beside):
            yield Fault("standby", spare.place, f"{spare.antenna} cannot stand by for a contact of its own")


def stands_by(contacts: Sequence[Contact], contact: Contact, service: str | None = None) -> list[Contact]:
    """The stand-bys of a contact that offer ``service``, or else what the contact itself does."""
    asked = service or contact.service
    return [spare for spare in contacts if spare.standby and _together(contact, spare)
            and spare.antenna != contact.antenna and spare.service in (asked, "both")]


def check_standby_downlink(run: Run, contact: Contact, seen: Sight) -> Iterator[Fault]:
    """The link of a stand-by would hold for as long as it says, on the modcod that it names."""
    radio = run.radios[contact.radio]
    quality = downlink_quality(run, contact, radio, seen) if isinstance(radio, DownlinkRadio) else None
    if quality is None or not isinstance(radio, DownlinkRadio):
        yield Fault("radio", contact.place, f"no receiver of {contact.antenna} can hear radio {contact.radio}")
        return
    rows = [row for row in run.modcod_tables[radio.modcod_table].rows
            if (not radio.modcods or row.name in radio.modcods) and contact.modcod in (row.name, "stepped")]
    if not rows:
        yield Fault("modcod", contact.place, f"modcod {contact.modcod!r} is not one it may use here")
        return
    needed_db = min(row.required_esn0_db for row in rows) + run.policy.required_margin_db
    held_s = quality.longest_s(needed_db - _TOLERANCE_DB) - radio.acquisition_s
    if contact.usable_s <= 0.0 or contact.usable_s > held_s + _TOLERANCE_S:
        sentence = f"it could use {max(held_s, 0.0):.0f} s of modcod {contact.modcod}, not {contact.usable_s:g} s"
        yield Fault("usable", contact.place, sentence)


def _together(contact: Contact, spare: Contact) -> bool:
    return contact.spacecraft == spare.spacecraft and max(
        abs(contact.start_s - spare.start_s), abs(contact.end_s - spare.end_s)) < _SAME_S
