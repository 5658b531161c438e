"""Time on rented or partner antennas: what was asked for, granted or declined, and by when to ask or give back."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Literal

from pydantic import model_validator

from passplan.inputs.errors import Findings, nearest
from passplan.inputs.ground import Antenna
from passplan.inputs.lines import few_faults
from passplan.inputs.reader import Reader
from passplan.inputs.records import Instant, Record
from passplan.inputs.tables import checked, read_csv_records

BookingState = Literal["open", "asked", "granted", "declined"]


class Booking(Record):
    """One half-open interval on a rented antenna and how it stands.

    ``open`` is offered and not asked for yet. ``ask_by_utc`` is the latest moment at which ``open`` or ``asked``
    time can still come to be granted; ``give_back_by_utc`` the latest at which ``granted`` time can be returned.
    """

    antenna: str
    start_utc: Instant
    end_utc: Instant
    state: BookingState
    ask_by_utc: Instant | None = None
    give_back_by_utc: Instant | None = None
    note: str = ""

    @model_validator(mode="after")
    def _consistent(self) -> Booking:
        if self.start_utc >= self.end_utc:
            raise ValueError("end_utc is not after start_utc; swap or correct them")
        if self.give_back_by_utc is not None and self.state != "granted":
            raise ValueError(f"only granted time can be given back, this is {self.state}; remove give_back_by_utc")
        return self


def read_bookings(
    files: Sequence[Path], antennas: Mapping[str, Antenna], reader: Reader, findings: Findings,
) -> tuple[Booking, ...]:
    """The bookings of all ``files`` (CSV), by antenna and start.

    A problem is noted for an antenna that is unknown or not rented, and for rows of one antenna that overlap.
    """
    placed: list[tuple[Booking, Path, str]] = []
    for file in files:
        with few_faults(file, findings) as own:
            for where, row in read_csv_records(file, reader, own):
                booking: Booking | None = checked(Booking, row, file, where, own)
                if booking is None:
                    continue
                antenna = antennas.get(booking.antenna)
                if antenna is None and antennas and booking.antenna not in findings.unsound:
                    own.problem(file, f"{where}.antenna", booking.antenna,
                                f"no such antenna; {nearest(booking.antenna, antennas)}")
                elif antenna is not None and not antenna.rented:
                    own.problem(file, f"{where}.antenna", booking.antenna,
                                "is not rented; set rented = true in the ground file, or use a closure")
                else:
                    placed.append((booking, file, where))
    placed.sort(key=lambda one: (one[0].antenna, one[0].start_utc, one[0].end_utc))
    furthest: dict[str, tuple[Booking, Path, str]] = {}
    for one in placed:
        booking, file, where = one
        held = furthest.get(booking.antenna)
        if held is not None and held[0].end_utc > booking.start_utc:
            findings.problem(file, where, None, f"overlaps {held[1].name}, {held[2]}; an instant has one state only")
        if held is None or held[0].end_utc < booking.end_utc:
            furthest[booking.antenna] = one
    return tuple(booking for booking, _, _ in placed)
