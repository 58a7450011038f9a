"""Which queries of a dialect an instrument takes for queries: asked one by one or all at once; nothing is set.

Only a command error (-199 to -100, SCPI-1999 volume 2 chapter 21, from memory) or silence means no: a query that was
understood may still have nothing to tell. Entries without a query form and those that answer in blocks are passed over.
"""

from __future__ import annotations

from collections.abc import Sequence

from benchrun.errors import NoAnswerError, ReplyError
from benchrun.visa.conversation import Conversation
from benchrun.visa.dialect import Dialect
from benchrun.visa.exchange import Use, compose, take_apart

#: How long a query is waited for, and how long the error queue may then take to say that it was none.
WAIT_S = 0.25
LONG_WAIT_S = 3.0


class Probe:
    """Tries queries. Raises LinkError where the link breaks."""

    def __init__(self, talk: Conversation, dialect: Dialect) -> None:
        self._talk = talk
        self._dialect = dialect

    def not_understood(self, entries: Sequence[str], enough: int | None = None) -> list[str]:
        """Return the entries that are not understood, at most `enough`."""
        found: list[str] = []
        for name in entries:
            if self._askable(name) and not self._understands([self._use(name)], WAIT_S):
                found.append(name)
            if enough is not None and len(found) >= enough:
                break
        return found

    def understands_all(self, entries: Sequence[str]) -> bool:
        """Whether all are understood, asked in one message."""
        asks = [self._use(name) for name in entries if self._askable(name)]
        wait_s = sum(use.entry.deadline_s or WAIT_S for use in asks)
        return not asks or self._understands(asks, min(wait_s, LONG_WAIT_S))

    def _askable(self, name: str) -> bool:
        entry = self._dialect.entries.get(name)
        return entry is not None and entry.ask is not None and entry.reply is not None and entry.reply.kind != "block"

    def _use(self, name: str) -> Use:
        """Return an entry with 1 for each of its channels."""
        entry = self._dialect[name]
        return Use(entry, dict.fromkeys(entry.ask.names if entry.ask else (), 1))

    def _understands(self, asks: Sequence[Use], wait_s: float) -> bool:
        """Whether queries are answered, or at least bring no command error in the time a slow one may need."""
        talk = self._talk
        with talk.lock:
            try:
                entries = [take_apart(talk.say(compose([], asks), wait_s, explain=False)).error]
            except (NoAnswerError, ReplyError):
                entries = []
            if not entries or entries[0].number:
                talk.suspect = True
                try:
                    entries += talk.queue(LONG_WAIT_S)
                except NoAnswerError:
                    return False
                except ReplyError:
                    return True  # the answer itself came, too late
            return not any(-200 < one.number <= -100 for one in entries)
