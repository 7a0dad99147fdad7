"""How much a baseline takes.

Knows three figures. Must not know what they are held against.
"""

from __future__ import annotations

from monitor import times

ENOUGH = 1_000
"""Independent subgroups from which on an estimate costs about half of the promise at worst."""
LEAST = 20
"""Independent subgroups below which no figure is worth writing down (common practice: 20 to 25)."""
NEARLY = 0.99
"""A recording of a shift need not begin with its first reading and end with its last."""
SHIFT = 8 * 3_600 * times.SECOND
"""What acts from shift to shift must have had a chance to act (µs)."""
