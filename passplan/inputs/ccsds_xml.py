"""XML of CCSDS navigation messages, read through a parser that refuses entities and document types."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Any

from defusedxml import ElementTree as SafeTree
from defusedxml.common import DefusedXmlException

from passplan.inputs.errors import Findings
from passplan.inputs.lines import shortened


def xml_root(content: bytes, file: str | Path, findings: Findings) -> Any | None:
    """The root element of ``content``, or None with a problem noted. Never expands an entity."""
    try:
        return SafeTree.fromstring(content, forbid_dtd=True)
    except DefusedXmlException:
        remedy = "the XML declares a document type or entities, which are not read; remove the declaration"
    except (SyntaxError, ValueError, LookupError) as fault:  # ElementTree.ParseError is a SyntaxError
        remedy = f"not valid XML ({shortened(str(fault))}); correct or fetch the file again"
    findings.problem(file, "", None, remedy)
    return None


def tag(element: Any) -> str:
    """The tag without its namespace; NDM/XML is met with and without one."""
    return str(element.tag).rpartition("}")[2]


def find_all(parent: Any, name: str) -> list[Any]:
    """All descendants of ``parent`` (and itself) with the tag ``name``, in document order."""
    return [element for element in parent.iter() if tag(element) == name]


def find_first(parent: Any, name: str) -> Any | None:
    """The first child of ``parent`` with the tag ``name``, or None."""
    return next((child for child in parent if tag(child) == name), None)


def leaves(parent: Any) -> Iterator[tuple[str, str, str]]:
    """The (tag, text, units) of the children of ``parent`` that hold text only; comments are left out."""
    for child in parent:
        if len(child) == 0 and tag(child) != "COMMENT" and isinstance(child.tag, str):
            yield tag(child), (child.text or "").strip(), child.get("units", "").strip()
