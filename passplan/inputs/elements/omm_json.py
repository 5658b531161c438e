"""OMM in JSON: one object, or a list of objects, with the keywords of the standard as keys."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from passplan.inputs.elements.model import ElementSet
from passplan.inputs.elements.omm import OmmRecord, sets_of
from passplan.inputs.errors import Findings
from passplan.inputs.lines import shortened


def parse_omm_json(text: str, file: str | Path, findings: Findings) -> list[ElementSet]:
    """All sound element sets in ``text``; each fault is noted as a problem naming record and keyword."""
    try:
        document = json.loads(text, object_pairs_hook=_without_repeats)
    except RecursionError:
        findings.problem(file, "", None, "the JSON is nested too deeply; write a list of flat objects")
        return []
    except ValueError as fault:
        findings.problem(file, "", None, f"not valid JSON ({shortened(str(fault))}); correct or fetch the file again")
        return []
    items = document if isinstance(document, list) else [document]
    records: list[OmmRecord] = []
    for number, item in enumerate(items, start=1):
        if isinstance(item, dict):
            records.append((f"record {number}", item))
        else:
            findings.problem(file, f"record {number}", None, "not an object with OMM keywords; correct it")
    return sets_of(records, file, findings)


def _without_repeats(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    """A JSON object; of a key that stands twice the decoder would keep the last and lose the other."""
    found: dict[str, Any] = {}
    for key, value in pairs:
        if key in found:
            raise ValueError(f"the key {shortened(key)!r} stands twice in one object")
        found[key] = value
    return found
