"""Which of the messages that come after a reconnect were journaled before.

Knows the messages whose acknowledgement the broker may not have, in order. Must not know sockets,
files or readings. What the broker sends again it sends first, all of it, and in its old order (MQTT
3.1.1, section 4.6), so what is to be recognised is a run: the longest end of what was journaled
that equals the beginning of what comes.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Hashable, Iterable, Sequence
from itertools import takewhile

from monitor.entries import Message, Recorded

_MOST = 65_535  # unacknowledged messages differ in their packet identifiers, of 16 bits

Came = Sequence[tuple[Message, bool]]
"""Messages, each with its DUP."""


class Resends:
    """Recognises what is sent again.

    A broker that sets DUP promises the old packet identifier with it (section 3.3.1). One that
    never does may send again under new ones; then only topics and payloads tell.
    """

    __slots__ = ("_begun", "_expected", "_probed", "_probes", "_unproven", "marks_them", "proven")

    def __init__(self, unproven: Iterable[tuple[int, Recorded]] = ()) -> None:
        self._unproven: deque[tuple[int, Message]] = deque(maxlen=_MOST)
        self._expected: list[Message] = []
        self._begun = False
        self._probes: dict[int, int] = {}
        self._probed = 0
        self.marks_them = False
        """Whether this broker was seen to set DUP: then what comes without is new."""
        self.proven = 0
        """The journal position up to which the broker has our acknowledgements."""
        for position, entry in unproven:
            self.journaled(position, (entry,))

    @property
    def matching(self) -> bool:
        """Whether what comes next may have come before."""
        return bool(self._expected)

    def journaled(self, position: int, entries: Iterable[Recorded]) -> None:
        """Entries became durable, the first at ``position``; the broker may not know yet."""
        for at, entry in enumerate(entries, position):
            if isinstance(entry, Message) and entry.qos:
                self._unproven.append((at, entry))

    def proof(self, packet: int, position: int) -> None:
        """The latest publication is ``packet``; it left after the acknowledgements up to
        ``position``, unless it is the same as before.

        The broker reads in order: when it has taken over the one, it has the others. Not while some
        may still be sent again: of those it has no acknowledgement yet.
        """
        if packet != self._probed and not self.matching:
            self._probes[packet] = position
        self._probed = packet

    def taken(self, packet: int) -> None:
        """The broker took over a publication."""
        position = self._probes.pop(packet, None)
        if position is None:
            return
        self.proven = max(self.proven, position)
        while self._unproven and self._unproven[0][0] <= self.proven:
            self._unproven.popleft()

    def reconnected(self, folded: Iterable[Recorded] = ()) -> None:
        """From now on messages may be sent again, until one is new.

        ``folded`` are to be durable before anything else is.
        """
        self._expected = [message for _, message in self._unproven]
        self._expected += [e for e in folded if isinstance(e, Message) and e.qos]
        self._begun, self._probed = False, 0
        self._probes.clear()

    def session_lost(self) -> None:
        """The broker has forgotten what it sent: nothing comes again."""
        self._expected = []
        self._unproven.clear()

    def again(self, came: Came, *, quiet: bool, full: bool) -> int | None:
        """How many of the messages that came next were journaled before.

        None where only what follows can tell: then ask again with it. ``quiet`` says that nothing
        follows, ``full`` that no more can be waited for.
        """
        self.marks_them = self.marks_them or any(dup for _, dup in came)
        sure = self.marks_them or full  # by packet identifiers, or by the length of the run
        ours = [self._key(message, marked=self.marks_them) for message in self._expected]
        theirs = [
            self._key(message, marked=dup) if dup or not self.marks_them else None
            for message, dup in came
        ]
        if self._begun:
            begin, count = 0, sum(1 for _ in takewhile(_equal, zip(ours, theirs, strict=False)))
            goes_on = count == len(theirs) < len(ours)
        else:
            count, within = _end_that_begins(ours, theirs)
            begin, goes_on = within or 0, within is not None
            if goes_on and sure:
                count = len(theirs)
        if quiet or not goes_on:
            self._expected = []
            return count
        if not sure:
            return None
        self._expected = self._expected[begin + count :]
        self._begun = self._begun or count > 0
        return count

    @staticmethod
    def _key(message: Message, *, marked: bool) -> Hashable:
        return message.topic, message.payload, message.packet if marked else None


def _equal(pair: tuple[Hashable, Hashable]) -> bool:
    return pair[0] == pair[1]


def _end_that_begins(
    ours: Sequence[Hashable], theirs: Sequence[Hashable]
) -> tuple[int, int | None]:
    """The length of the longest end of ``ours`` with which ``theirs`` begins, and the first place
    in ``ours`` where all of ``theirs`` stands with more after it, or None.

    By D. E. Knuth, J. H. Morris & V. R. Pratt 1977, SIAM J. Computing 6: payloads that repeat cost
    no more than others.
    """
    if not theirs:
        return 0, 0 if ours else None
    borders = _borders(theirs)
    length, within = 0, None
    for place, key in enumerate(ours):
        if length == len(theirs):
            length = borders[-1]
        while length and key != theirs[length]:
            length = borders[length - 1]
        if key == theirs[length]:
            length += 1
        if length == len(theirs) and within is None and place + 1 < len(ours):
            within = place + 1 - length
    return length, within


def _borders(keys: Sequence[Hashable]) -> list[int]:
    """For each beginning of ``keys``, the longest shorter one that also ends it."""
    borders = [0] * len(keys)
    length = 0
    for place in range(1, len(keys)):
        while length and keys[place] != keys[length]:
            length = borders[length - 1]
        if keys[place] == keys[length]:
            length += 1
        borders[place] = length
    return borders
