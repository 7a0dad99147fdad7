"""The alerts that a journal holds: by id, the events of one, the latest.

Knows the journal's table of alerts. Must not know entries, or how an alert is told.
"""

from __future__ import annotations

import difflib
import re
import sqlite3
from dataclasses import dataclass

import orjson

from monitor.explaining.evidence import Kept, decode
from monitor.messages import AlertEvent

SHORTEST = 4
"""Digits of an id that people must give."""

_MOST = 5
_RECENT = 2_000
_DIGITS = re.compile(f"[0-9a-f]{{{SHORTEST},32}}")


class NoSuchAlertError(Exception):
    """There is no such alert, or more than one; the text says which there are."""


@dataclass(frozen=True, slots=True)
class Occurrence:
    """An event in the life of an alert, as it was journaled; ``time`` is the arrival of its cause
    (µs)."""

    time: int
    event: AlertEvent
    text: bytes
    """The event to the byte."""
    evidence: bytes

    def kept(self) -> Kept:
        """What it was decided on; ValueError where that is of another version."""
        return decode(self.evidence)


def life(db: sqlite3.Connection, wanted: str) -> list[Occurrence]:
    """The events of the alert whose id is or begins with ``wanted``, oldest first; at least one.

    NoSuchAlertError where that is not one alert.
    """
    query = "SELECT time, event, evidence FROM alerts WHERE id = ? ORDER BY position"
    return [
        Occurrence(time, orjson.loads(event), event, evidence)
        for time, event, evidence in db.execute(query, (_only(db, wanted),))
    ]


def _only(db: sqlite3.Connection, wanted: str) -> str:
    """The id of the one alert that ``wanted`` means."""
    digits = wanted.strip("… ").lower()
    if _DIGITS.fullmatch(digits):
        after = digits[:-1] + chr(ord(digits[-1]) + 1)  # what sorts after all that begin so
        query = "SELECT DISTINCT id FROM alerts WHERE id >= ? AND id < ? LIMIT ?"
        found = [known for (known,) in db.execute(query, (digits, after, _MOST + 1))]
        if len(found) == 1:
            return str(found[0])
        if found:
            raise NoSuchAlertError(
                f"more than one alert's id begins with {digits}; give more of it:"
                + "".join(f"\n  {_line(db, each)}" for each in found[:_MOST])
                + ("\n  …" if len(found) > _MOST else "")
            )
    recent = "SELECT id FROM alerts GROUP BY id ORDER BY max(position) DESC LIMIT ?"
    known = [str(each) for (each,) in db.execute(recent, (_RECENT,))]
    if not known:
        raise NoSuchAlertError("the journal holds no alerts")
    what, close = f"no alert's id begins with {wanted.strip()!r}", []
    if len(digits) < SHORTEST:
        what = f"{wanted!r} is too short: an alert is named by {SHORTEST} digits of its id or more"
    else:
        short = {each[: len(digits)]: each for each in reversed(known)}
        close = [short[each] for each in difflib.get_close_matches(digits, short, _MOST)]
    listed = close or known[:_MOST]
    raise NoSuchAlertError(
        f"{what}; {'similar ones' if close else 'the latest'}:"
        + "".join(f"\n  {_line(db, each)}" for each in listed)
    )


def _line(db: sqlite3.Connection, known: str) -> str:
    query = "SELECT event FROM alerts WHERE id = ? ORDER BY position LIMIT 1"
    event = orjson.loads(db.execute(query, (known,)).fetchone()[0])
    return f"{known}  {event['time']}  {event['text']}"
