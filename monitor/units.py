"""The unit of what is charted.

Knows how units are written. Must not know values.
"""

from __future__ import annotations

_WHOLE = ("%", "‰", "°C", "°F")


def of_chart(chart: str, unit: str) -> str:
    """The characteristic's own ``unit``, or of a variance its square: ``g²``, ``(N·m)²``."""
    if chart != "variance" or not unit:
        return unit
    return f"{unit}²" if unit.isalpha() or unit in _WHOLE else f"({unit})²"
