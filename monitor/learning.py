"""Gathering what a stream's baseline is to be estimated from, subgroup by subgroup.

Knows how much is enough, and how to keep within bounds. Must not know how a baseline is estimated,
or what becomes of it.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from itertools import compress
from typing import Any

import numpy as np

from monitor.baselining.material import StreamSubgroups
from monitor.plan import LearnPlan, Stream
from monitor.subgroups import Subgroup

_BLOCK = 50
_LEAST_ROOM = 2_000


class Learner:
    """The subgroups of one stream since it began to learn.

    Beyond twice as many as are asked for, every other block of neighbours is let go, so that those
    that stay still tell how subgroups follow each other and reach over the whole time.
    """

    __slots__ = ("_columns", "_first", "_last", "_plan", "_room", "_seen", "_stride", "_want")

    def __init__(self, plan: LearnPlan) -> None:
        self._plan = plan
        # Whole blocks, an even number of them.
        pair = 2 * _BLOCK
        self._room = max(_LEAST_ROOM, -(-2 * plan.subgroups // pair) * pair)
        self.restart()

    def restart(self) -> None:
        """From nothing."""
        self._columns: list[list[Any]] = [[], [], [], [], [], []]
        self._seen = 0
        self._stride = 1
        self._want = self._plan.subgroups
        self._first = self._last = 0

    @property
    def told(self) -> str:
        """How far it is, in words."""
        plan = self._plan
        if self._seen < self._want:
            return f"learning a baseline: {self._seen} of {self._want} subgroups"
        hours = (self._last - self._first) / 3.6e9
        return f"learning a baseline: {hours:.1f} of {plan.over_at_least / 3.6e9:g} h"

    def add(self, subgroup: Subgroup) -> bool:
        """Take a finished subgroup; whether there is now enough to estimate from (again)."""
        block, number = divmod(self._seen, _BLOCK)
        if not self._seen:
            self._first = subgroup.last
        self._seen += 1
        self._last = subgroup.last
        if block % self._stride == 0:
            sd = subgroup.sd
            row = (
                subgroup.last,
                subgroup.size,
                subgroup.mean,
                math.nan if sd is None else sd * sd,
                math.nan if subgroup.range is None else subgroup.range,
                subgroup.broken or (number == 0 and self._stride > 1),
            )
            for column, value in zip(self._columns, row, strict=True):
                column.append(value)
            if len(self._columns[0]) >= self._room:
                self._thin()
        enough = self._seen >= self._want
        if enough and self._last - self._first >= self._plan.over_at_least:
            self._want = self._seen + self._plan.subgroups
            return True
        return False

    def material(self, stream: Stream) -> StreamSubgroups:
        """What was gathered."""
        time, size, mean, variance, extent, broken = self._columns
        return StreamSubgroups(
            stream,
            np.array(time, np.int64),
            np.array(size, np.int64),
            np.array(mean, float),
            np.array(variance, float),
            np.array(extent, float),
            np.array(broken, np.bool_),
        )

    def _thin(self) -> None:
        count = len(self._columns[0])
        kept = [(at // _BLOCK) % 2 == 0 for at in range(count)]
        self._columns = [list(compress(column, kept)) for column in self._columns]
        broken = self._columns[-1]
        broken[::_BLOCK] = [True] * len(broken[::_BLOCK])
        self._stride *= 2

    def state(self) -> list[Any]:
        """What is remembered, as JSON values; nan is null there."""
        columns = [
            [None if value != value else value for value in column] for column in self._columns
        ]
        return [columns, self._seen, self._stride, self._want, self._first, self._last]

    def restore(self, state: Sequence[Any]) -> None:
        """Take back what ``state`` gave."""
        columns, self._seen, self._stride, self._want, self._first, self._last = state
        self._columns = [
            [math.nan if value is None else value for value in column] for column in columns
        ]
