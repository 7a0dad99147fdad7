"""Which of the messages that come after a reconnect were journaled before.

Knows the messages whose acknowledgement the broker may not have, in order. Must not know sockets,
files or readings. What the broker sends again of a topic it sends before what is new there, all of
it, and in its order (MQTT 3.1.1, section 4.6), so what is to be recognised is a run: the longest
end of what was journaled that equals the beginning of what comes.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable, Sequence

from monitor.entries import Message, Recorded

_MOST = 65_535  # unacknowledged messages differ in their packet identifiers, of 16 bits
_TELLING = 8  # values in a row that are hardly the same by chance

Came = tuple[Message, bool]
"""A message and its DUP."""


class Resends:
    """Recognises what is sent again.

    ``unproven`` are the journaled entries after position ``proven``, each with its own.
    """

    __slots__ = (
        "_by_packet",
        "_keeps",
        "_newest",
        "_probed",
        "_probes",
        "_runs",
        "_unproven",
        "proven",
    )

    def __init__(self, unproven: Iterable[tuple[int, Recorded]] = (), proven: int = 0) -> None:
        self._unproven: deque[tuple[int, Message]] = deque(maxlen=_MOST)
        self._runs: dict[str, list[bytes]] = {}
        self._by_packet: dict[int, tuple[int, Message]] = {}
        self._newest = 0
        self._keeps: bool | None = None
        self._probes: dict[int, int] = {}
        self._probed = 0
        self.proven = proven
        """The journal position up to which the broker has our acknowledgements."""
        for position, entry in unproven:
            self.journaled(position, (entry,))

    @property
    def matching(self) -> bool:
        """Whether what comes next may have come before."""
        return bool(self._runs)

    def journaled(self, position: int, entries: Iterable[Recorded]) -> None:
        """Entries became durable, the first at ``position``; the broker may not know yet."""
        for at, entry in enumerate(entries, position):
            if isinstance(entry, Message) and entry.qos:
                self._unproven.append((at, entry))

    def proof(self, packet: int, position: int) -> None:
        """The latest publication is ``packet``; unless it was before, it left after the
        acknowledgements up to ``position``.

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
        """From now on messages may be sent again, until they are new.

        ``folded`` are to be durable before anything else is.
        """
        expected = [message for _, message in self._unproven]
        expected += [e for e in folded if isinstance(e, Message) and e.qos]
        self.nothing_more()
        for place, message in enumerate(expected):
            self._runs.setdefault(message.topic, []).append(message.payload)
            self._by_packet[message.packet] = place, message
        self._newest = expected[-1].packet if expected else 0
        self._keeps, self._probed = None, 0
        self._probes.clear()

    def session_gone(self) -> None:
        """The broker remembers nothing of ours: whatever comes is new."""
        self.nothing_more()
        self._unproven.clear()

    def nothing_more(self) -> None:
        """Whatever comes from now on is new."""
        self._runs.clear()
        self._by_packet.clear()

    def again(self, came: Sequence[Came], *, final: bool) -> tuple[list[Message], int]:
        """Those of the messages that came next which were journaled before; and how many of the
        messages that is said of.

        Of the others only what follows can tell: ask again with it, or ``final`` where no more can
        be waited for.
        """
        if self._keeps is None and came:
            self._keeps = self._keeps_identifiers(*came[0])
        return self._by_identifier(came) if self._keeps else self._by_content(came, final)

    def _keeps_identifiers(self, first: Message, dup: bool) -> bool:
        """Whether this broker sends again as MQTT demands: with DUP, under the old identifiers
        (section 3.3.1). Others send again as if it were new; then only order and payload tell.

        So one does whose first message has an identifier of ours, or the very next one.
        """
        known = dup and self._place(first) is not None
        return known or first.packet == self._newest % _MOST + 1

    def _place(self, message: Message) -> int | None:
        """Where among the expected it stands, under its identifier."""
        place, known = self._by_packet.get(message.packet, (0, None))
        same = known and (known.topic, known.payload) == (message.topic, message.payload)
        return place if same else None

    def _by_identifier(self, came: Sequence[Came]) -> tuple[list[Message], int]:
        last = -1
        for count, (message, dup) in enumerate(came):
            place = self._place(message) if dup else None
            if place is None or place <= last:
                self.nothing_more()
                return [each for each, _ in came[:count]], len(came)
            last = place
        return [each for each, _ in came], len(came)

    def _by_content(self, came: Sequence[Came], final: bool) -> tuple[list[Message], int]:
        by_topic: dict[str, list[bytes]] = {}
        for message, _ in came:
            if message.topic in self._runs:
                by_topic.setdefault(message.topic, []).append(message.payload)
        again: dict[str, list[bytes]] = {}
        for topic, payloads in by_topic.items():
            run = self._runs[topic]
            count, within = _end_that_begins(run, payloads)
            if within is None or (final and len(payloads) < _TELLING):
                again[topic] = run[len(run) - count :]
            elif final:
                # The broker waits for acknowledgements before it sends the rest.
                again[topic] = run[within:]
        open_topics = by_topic.keys() - again.keys()
        told = next((n for n, (each, _) in enumerate(came) if each.topic in open_topics), len(came))
        found: list[Message] = []
        for message, _ in came[:told]:
            if again.get(message.topic):
                found.append(message)
                del again[message.topic][0]
        for topic, left in again.items():
            if left:
                self._runs[topic] = left
            else:
                del self._runs[topic]
        return found, told


def _end_that_begins(ours: Sequence[bytes], theirs: Sequence[bytes]) -> tuple[int, int | None]:
    """The length of the longest end of ``ours`` with which ``theirs`` begins, and the first place
    in ``ours`` where all of ``theirs`` stands with more after it, or None.

    By D. E. Knuth, J. H. Morris & V. R. Pratt 1977, SIAM J. Computing 6: payloads that repeat cost
    no more than others.
    """
    borders = _borders(theirs)
    length, within = 0, None
    for place, payload in enumerate(ours):
        if length == len(theirs):
            length = borders[-1]
        while length and payload != theirs[length]:
            length = borders[length - 1]
        if payload == theirs[length]:
            length += 1
        if length == len(theirs) and within is None and place + 1 < len(ours):
            within = place + 1 - length
    return length, within


def _borders(payloads: Sequence[bytes]) -> list[int]:
    """For each beginning of ``payloads``, the longest shorter one that also ends it."""
    borders = [0] * len(payloads)
    length = 0
    for place in range(1, len(payloads)):
        while length and payloads[place] != payloads[length]:
            length = borders[length - 1]
        if payloads[place] == payloads[length]:
            length += 1
        borders[place] = length
    return borders
