"""OMM in keyword-value notation: one message, or several one after the other."""

from __future__ import annotations

from pathlib import Path

from passplan.inputs.ccsds_kvn import is_comment, key_value
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.elements.omm import KEYWORDS, sets_of, unit_is_right
from passplan.inputs.errors import Findings
from passplan.inputs.lines import numbered_lines, shortened

_FIRST_KEYWORD = "CCSDS_OMM_VERS"


def parse_omm_kvn(text: str, file: str | Path, findings: Findings) -> list[ElementSet]:
    """All sound element sets in ``text``; a message begins at each CCSDS_OMM_VERS.

    Faulty lines, keywords that stand twice and units other than those of the standard are problems.
    """
    messages: list[dict[str, str]] = []
    sound = True
    for number, raw in numbered_lines(text):
        line = raw.strip()
        if is_comment(line):
            continue
        where = f"line {number}"
        found = key_value(line)
        if found is None:
            findings.problem(file, where, shortened(line), "not of the form KEYWORD = value; correct the line")
            sound = False
            continue
        key, value, unit = found
        if key == _FIRST_KEYWORD or not messages:
            messages.append({})
        if key in messages[-1] and key in KEYWORDS:
            findings.problem(
                file,
                where,
                shortened(line),
                f"{key} stands twice; begin each message with {_FIRST_KEYWORD} or remove one",
            )
            sound = False
        if not unit_is_right(key, unit):
            findings.problem(file, where, shortened(line), f"{key} has another unit in the standard; convert it")
            sound = False
        messages[-1][key] = value
    if not messages and sound:
        findings.problem(file, "", None, "the file holds no message; fetch it again")
    return sets_of([(f"record {i}", message) for i, message in enumerate(messages, 1)], file, findings)
