"""The antennas' day as one picture for mail and slides: SVG of our own, PNG through resvg where it is installed."""

from __future__ import annotations

from collections.abc import Sequence
from html import escape
from importlib.util import find_spec
from pathlib import Path

from passplan.inputs.run import Run
from passplan.planning.record import PlanRecord
from passplan.report.keys import spacecraft_keys
from passplan.report.page.axis import Band, Day
from passplan.report.page.lanes import Names, antenna_ribbons
from passplan.report.page.ribbons import UNIT_S, Ribbon
from passplan.report.table_files import MissingLibraryError
from passplan.report.tracks import WindowTrack, window_tracks
from passplan.report.words import megabytes, minute, rate

_WIDTH, _LEFT, _RIGHT, _TOP, _LANE, _TALL = 1600, 210, 24, 118, 98, 56
# Between the lanes of two days.
_RULER = 44
_SHADES = (
    "Light: in view, as high as the rate the link allows. Dark: used. Hatched: closed. "
    "Planning aid, not permission to transmit."
)
_STYLE = """
text{font-family:'DejaVu Sans','Segoe UI',Helvetica,Arial,sans-serif;font-size:14px;fill:#1b2a32}
.soft{fill:#56646c;font-size:12px}.name{font-weight:700;font-size:15px}.title{font-weight:700;font-size:26px}
.key{font-family:'DejaVu Sans Mono',monospace;font-size:12px;font-weight:700;text-anchor:middle}
.draft{fill:#9a5200;font-weight:700;font-size:18px}
.sky{fill:#d3e3e6;stroke:#6f9aa5;stroke-width:.8}.used{fill:#0f6a7c;stroke:#0f6a7c}
.grid{stroke:#ece8de}.foot{stroke:#bdb8ab}.closed{fill:url(#hatch);stroke:#9b8579}
path{vector-effect:non-scaling-stroke}
"""


def picture_svg(record: PlanRecord, run: Run, tracks: Sequence[WindowTrack] | None = None) -> str:
    """The timeline of all antennas as a standalone SVG document, with the draft mark and a legend."""
    tracks = window_tracks(run, record.windows) if tracks is None else tracks
    summary = record.summary
    keys = spacecraft_keys(summary["spacecraft"])
    names, bands = Names.of(record, keys), Day.of(record).bands()
    legend = _legend(keys)
    lanes = len(summary["antennas"])
    tall = _RULER + _LANE * lanes
    foot = _TOP - _RULER + tall * len(bands)
    height = foot + 26 * len(legend) + 40
    parts = [
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{_WIDTH}" height="{height}" '
        f'viewBox="0 0 {_WIDTH} {height}" role="img">',
        f"<title>{escape(summary['name'])}</title><style>{_STYLE}</style>",
        '<defs><pattern id="hatch" width="7" height="7" patternTransform="rotate(45)" patternUnits="userSpaceOnUse">'
        '<path d="M0 0V7" stroke="#9b8579" stroke-width="2"/></pattern></defs>',
        f'<rect width="{_WIDTH}" height="{height}" fill="#fbfaf6"/>',
        *_head(record),
    ]
    for k, band in enumerate(bands):
        top = _TOP + tall * k
        parts += _ruler(band, top, lanes, named=len(bands) > 1)
        for i, (name, ribbon) in enumerate(antenna_ribbons(record, tracks, names, band).items()):
            parts += _lane(name, ribbon, band, top + _LANE * i)
    for i, line in enumerate(legend):
        parts.append(f'<text x="24" y="{foot + 32 + 26 * i}" class="soft">{escape(line)}</text>')
    return "\n".join([*parts, "</svg>"]) + "\n"


def write_png(svg: str, path: Path) -> None:
    """Write an SVG document as PNG, twice its size. Raises :class:`MissingLibraryError`."""
    if find_spec("resvg_py") is None:
        raise MissingLibraryError("PNG needs resvg-py; install passplan[png], or write SVG")
    import resvg_py

    path.write_bytes(bytes(resvg_py.svg_to_bytes(svg_string=svg, zoom=2)))


def _x(percent: float) -> float:
    return round(_LEFT + (_WIDTH - _LEFT - _RIGHT) * percent / 100.0, 1)


def _head(record: PlanRecord) -> list[str]:
    summary = record.summary
    facts = f"{minute(summary['horizon_start_utc'])} to {minute(summary['horizon_end_utc'])} UTC"
    facts += f" · {summary['contacts']} contacts · {megabytes(summary['volume_mb'])} · plan {summary['plan_id']}"
    draft = summary.get("approval", "draft") == "draft"
    mark = '<text x="24" y="28" class="draft">DRAFT until a named approval</text>' if draft else ""
    return [
        mark,
        f'<text x="24" y="58" class="title">{escape(summary["name"])}</text>',
        f'<text x="24" y="82">{escape(facts)}</text>',
    ]


def _ruler(band: Band, top: int, lanes: int, *, named: bool) -> list[str]:
    date = f'<text x="24" y="{top - 10}" class="name">{band.start_utc:%a %d %b}</text>'
    parts = [date] if named else []
    for left, text in band.hours():
        parts.append(f'<path class="grid" d="M{_x(left)} {top - 6}V{top + _LANE * lanes}"/>')
        anchor = "start" if left < 1.0 else "middle"
        parts.append(f'<text x="{_x(left)}" y="{top - 10}" class="soft" text-anchor="{anchor}">{escape(text)}</text>')
    return parts


def _lane(name: str, ribbon: Ribbon, band: Band, top: int) -> list[str]:
    foot = top + _LANE - 4
    count = len(ribbon.marks)
    parts = [
        f'<text x="24" y="{foot - 22}" class="name">{escape(name)}</text>',
        f'<text x="24" y="{foot - 5}" class="soft">{count} contact{"" if count == 1 else "s"}</text>',
        f'<path class="foot" d="M24 {foot}H{_WIDTH - _RIGHT}"/>',
    ]
    for span in ribbon.spans:
        width = max(_x(span.left + span.width) - _x(span.left), 1.0)
        parts.append(
            f'<rect class="closed" x="{_x(span.left)}" y="{foot - _TALL}" width="{width:.1f}" height="{_TALL}"/>'
        )
    across = (_WIDTH - _LEFT - _RIGHT) / (band.length_s / UNIT_S)
    origin = round(_LEFT - across * band.first_s / UNIT_S, 3)
    parts.append(f'<g transform="translate({origin} {foot - _TALL}) scale({across:.6f} {_TALL / 100:.4f})">')
    parts += [f'<path class="sky" d="{path}"/>' for path in ribbon.sky.values()]
    parts += [f'<path class="used" d="{path}"/>' for path in ribbon.used.values()]
    parts.append("</g>")
    for value, height in ribbon.scale.ticks():
        y = foot - _TALL * height / 100.0
        parts.append(f'<text x="{_LEFT - 8}" y="{y + 10:.1f}" class="soft" text-anchor="end">{rate(value)}</text>')
    for mark in ribbon.marks:
        middle, y = _x(mark.left + mark.width / 2), foot - _TALL - 4 - 11 * mark.level
        parts.append(f'<text x="{middle}" y="{y}" class="key">{escape(mark.key)}</text>')
    return parts


def _legend(keys: dict[str, str]) -> list[str]:
    """The spacecraft behind the letters, in lines that fit, and what the shades mean."""
    lines, line = [], ""
    if len(set(keys.values())) == len(keys):
        for name, key in keys.items():
            entry = f"{key} {name} · "
            if len(line) + len(entry) > 200:
                lines.append(line.rstrip(" ·"))
                line = ""
            line += entry
        lines.append(line.rstrip(" ·"))
    return [
        *lines,
        _SHADES,
    ]
