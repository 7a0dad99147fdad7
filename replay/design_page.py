"""A design as one page: the run length against the shift, with the floor.

Knows HTML and SVG; the page needs nothing from outside itself. Must not know how a figure was
worked out.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from html import escape

from replay.design import Design
from replay.design_words import BASIS, fragment, sentence, table

_WIDTH, _HEIGHT = 720, 420
_LEFT, _RIGHT, _TOP, _BOTTOM = 82, 20, 20, 55
_RAISED = str.maketrans("0123456789", "⁰¹²³⁴⁵⁶⁷⁸⁹")

_STYLE = """
body { font: 16px/1.5 system-ui, sans-serif; color: #1c2733; max-width: 46rem; margin: 2rem auto;
  padding: 0 1rem }
h1 { font-size: 1.35rem; line-height: 1.3 }
svg { width: 100%; height: auto }
svg text { font: 13px system-ui, sans-serif; fill: #44525f }
.grid { stroke: #dfe5ea } .axis { stroke: #8794a0 }
.own { stroke: #0b5c8a } .floor { stroke: #a8541a; stroke-dasharray: 6 4 }
.curve { fill: none; stroke-width: 2.5 }
svg text.own { fill: #0b5c8a; stroke: none } svg text.floor { fill: #a8541a; stroke: none }
table { border-collapse: collapse; font-variant-numeric: tabular-nums }
th, td { text-align: right; padding: .2rem .9rem .2rem 0; border-bottom: 1px solid #dfe5ea }
th { font-weight: 600 } .basis { color: #44525f; font-size: .9rem } code { font-size: .9rem }
@media print { body { margin: 0 } }
"""


def page(found: Design, curve: Design) -> str:
    """The page; ``curve`` is the same design at the shifts to be drawn, closer together."""
    header, *rows = table(found)
    cells = "".join(
        "<tr>" + "".join(f"<td>{escape(cell)}</td>" for cell in row) + "</tr>" for row in rows
    )
    heads = "".join(f"<th>{escape(cell)}</th>" for cell in header)
    return f"""<!DOCTYPE html>
<html lang="en"><head><meta charset="utf-8"><title>Run length against shift</title>
<meta name="viewport" content="width=device-width, initial-scale=1"><style>{_STYLE}</style></head>
<body><h1>{escape(sentence(found))}</h1>
<p><code>{escape(fragment(found))}</code></p>
{_chart(curve)}
<table><thead><tr>{heads}</tr></thead><tbody>{cells}</tbody></table>
<p class="basis">{escape(BASIS)}</p></body></html>
"""


def _chart(curve: Design) -> str:
    own = [
        (line.shift, line.run_length.subgroups)
        for line in curve.lines
        if math.isfinite(line.run_length.subgroups)
    ]
    floor = [(line.shift, line.floor) for line in curve.lines if line.floor is not None]
    lengths = [y for _, y in own + floor]
    decades = range(max(1, math.ceil(math.log10(max(lengths, default=10)))) + 1)
    shifts = [line.shift for line in curve.lines]
    axes = _Axes(min(shifts), max(max(shifts), min(shifts) + 1), decades[-1])
    step = max(1, math.ceil(len(decades) / 9))
    marks = [axes.decade(power) for power in decades[::step]]
    marks += [axes.shift(x) for x in _ticks(axes.low, axes.high)]
    return f"""<svg viewBox="0 0 {_WIDTH} {_HEIGHT}" role="img"
 aria-label="Average run length against shift, with the floor">
{"".join(marks)}
{axes.curve(floor, "floor")}{axes.curve(own, "own")}
<text x="{_LEFT}" y="{_HEIGHT - 8}">shift, standard errors</text>
<text x="{_LEFT + 8}" y="{_TOP + 4}">average run length, subgroups</text>
<text class="own" x="{_WIDTH - _RIGHT}" y="{_TOP + 4}" text-anchor="end">this detector</text>
<text class="floor" x="{_WIDTH - _RIGHT}" y="{_TOP + 22}" text-anchor="end">- - the floor</text>
</svg>"""


def _ticks(low: float, high: float) -> list[float]:
    """Round numbers from ``low`` to ``high``, about eight of them."""
    rough = (high - low) / 8
    power = 10 ** math.floor(math.log10(rough))
    step = next(m * power for m in (1, 2, 2.5, 5, 10) if m * power >= rough)
    first = math.ceil(low / step - 1e-9)
    return [step * i for i in range(first, math.floor(high / step + 1e-9) + 1)]


class _Axes:
    """Shift along, decades of run length up, to positions in the drawing."""

    def __init__(self, low: float, high: float, decades: int) -> None:
        self.low, self.high, self._decades = low, high, decades

    def _x(self, shift: float) -> float:
        inner = _WIDTH - _LEFT - _RIGHT
        return _LEFT + inner * (shift - self.low) / (self.high - self.low)

    def _y(self, power: float) -> float:
        inner = _HEIGHT - _TOP - _BOTTOM
        return _TOP + inner * (1 - power / self._decades)

    def decade(self, power: int) -> str:
        y = self._y(power)
        told = f"{10**power:,}" if power < 7 else f"10{str(power).translate(_RAISED)}"
        return (
            f'<line class="grid" x1="{_LEFT}" x2="{_WIDTH - _RIGHT}" y1="{y:.1f}" y2="{y:.1f}"/>'
            f'<text x="{_LEFT - 8}" y="{y + 4:.1f}" text-anchor="end">{told}</text>'
        )

    def shift(self, shift: float) -> str:
        x, foot = self._x(shift), _HEIGHT - _BOTTOM
        return (
            f'<line class="axis" x1="{x:.1f}" x2="{x:.1f}" y1="{foot}" y2="{foot + 5}"/>'
            f'<text x="{x:.1f}" y="{foot + 20}" text-anchor="middle">{shift:g}</text>'
        )

    def curve(self, points: Sequence[tuple[float, float]], name: str) -> str:
        path = " ".join(f"{self._x(x):.1f},{self._y(math.log10(y)):.1f}" for x, y in points)
        return f'<polyline class="curve {name}" points="{path}"/>'
