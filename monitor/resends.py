"""Which of the messages that come after a reconnect were journaled before.

Knows the messages whose acknowledgement the broker may not have, in order. Must not know sockets,
files or readings. What the broker sends again it sends first, and in its old order (MQTT 3.1.1,
section 4.6), so what is to be recognised is a run: the longest suffix of what was journaled that
equals the beginning of what comes.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable, Sequence

from monitor.entries import Message, Recorded

_MOST = 65_535  # unacknowledged messages differ in their packet identifiers, of 16 bits


class Resends:
    """Recognises what is sent again.

    A broker that never sets DUP may send again under new packet identifiers; then only topic and
    payload tell.
    """

    __slots__ = ("_begun", "_expected", "_probe", "_probed", "_unproven", "marks_them", "proven")

    def __init__(self, unproven: Iterable[tuple[int, Recorded]] = ()) -> None:
        self._unproven: deque[tuple[int, Message]] = deque(maxlen=_MOST)
        self._expected: list[Message] = []
        self._begun = False
        self._probe: tuple[int, int] | None = None
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
        """A publication left under ``packet`` after the acknowledgements up to ``position``.

        The broker reads in order: when it has taken over the one, it has the others.
        """
        if packet != self._probed and self._probe is None:
            self._probe = packet, position
        self._probed = packet

    def taken(self, packet: int) -> None:
        """The broker took over a publication."""
        if self._probe is None or self._probe[0] != packet:
            return
        self.proven, self._probe = self._probe[1], None
        while self._unproven and self._unproven[0][0] <= self.proven:
            self._unproven.popleft()

    def reconnected(self, folded: Iterable[Recorded] = ()) -> None:
        """From now on messages may be sent again, until one is new.

        ``folded`` are to be durable before anything else is.
        """
        self._expected = [message for _, message in self._unproven]
        self._expected += [e for e in folded if isinstance(e, Message) and e.qos]
        self._begun, self._probe, self._probed = False, None, 0

    def again(self, came: Sequence[tuple[Message, bool]]) -> int:
        """How many of the messages that came next, each with its DUP, were journaled before."""
        self.marks_them = self.marks_them or any(dup for _, dup in came)
        expected = self._expected
        # The longest suffix is the earliest beginning; once begun, the run goes on where it was.
        for begin in range(1 if self._begun else len(expected)):
            rest = expected[begin : begin + len(came)]
            if all(self._same(*now, before) for now, before in zip(came, rest, strict=False)):
                self._begun = True
                self._expected = expected[begin + len(rest) :]
                return len(rest)
        self._expected = []
        return 0

    def _same(self, message: Message, dup: bool, earlier: Message) -> bool:
        # DUP promises the old packet identifier (section 3.3.1).
        same = message.packet == earlier.packet if dup else not self.marks_them
        return same and message.topic == earlier.topic and message.payload == earlier.payload
