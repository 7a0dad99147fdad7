"""How long the journal keeps what, and what may go now.

Knows ages and sizes. Must not know what entries mean. Entries go up to a base only, so that what
is left can always be folded from there; and a few with each commit, since deleting many at once
stalls.
"""

from __future__ import annotations

from dataclasses import dataclass

from monitor import journal
from monitor.journal import Journal, Pruning
from monitor.plan import RetentionPlan

_LOOK_EVERY = 60_000_000  # microseconds between two looks at ages and sizes
_BASES = 30  # bases in the time that is kept
_SHORTEST = 3_600_000_000  # microseconds between two bases
_EACH = 20  # rows that a commit may have dropped
_FEW = 200  # rows dropped at once: nearly the same pages are rewritten for a tenth of them


@dataclass(slots=True)
class Retention:
    """Decides for one journal; instants in microseconds."""

    plan: RetentionPlan
    _looked: int = 0
    _entries_to: int = 0
    _alerts_to: int = 0
    _wants_base: bool = False
    _due: int = 0

    def look(self, kept: Journal, now: int) -> None:
        """Now and then, see what has become too old or too much."""
        if now - self._looked < _LOOK_EVERY:
            return
        self._looked = now
        oldest, newest = journal.bases_between(kept.db, now - self.plan.keep)
        self._entries_to = oldest
        if kept.used_bytes() > self.plan.max_size:
            following = journal.base_after(kept.db, kept.oldest)
            self._entries_to = max(self._entries_to, following)
            self._wants_base = following == 0
        self._alerts_to = journal.alerts_before(kept.db, now - self.plan.keep_alerts)
        spacing = max(self.plan.keep // _BASES, _SHORTEST)
        self._wants_base = self._wants_base or now - newest >= spacing

    def wants_base(self) -> bool:
        """Whether the next snapshot is to be kept as a base; once asked, not again until due."""
        wanted, self._wants_base = self._wants_base, False
        return wanted

    def few(self, coming: int) -> Pruning | None:
        """What the next commit may drop: more than came since the last, or the file would only
        grow. None where that is too few to be worth it."""
        self._due += max(_EACH, 2 * coming)
        if self._due < _FEW:
            return None
        due, self._due = self._due, 0
        return Pruning(self._entries_to, self._alerts_to, due)
