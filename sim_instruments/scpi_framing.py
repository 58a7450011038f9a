"""Where a program message ends: at a line feed outside a block, or where the transport says END (IEEE 488.2 7.5)."""

from __future__ import annotations

from .scpi_errors import ScpiError
from .scpi_lexer import block_span

INPUT_LIMIT = 16 * 1024 * 1024


class MessageSplitter:
    """Cuts a stream of bytes into program messages, without their terminators.

    A line feed inside a definite block is data. A line feed inside a string ends the message all the same: otherwise
    one forgotten quote would swallow everything that follows on a connection that has no END.
    """

    def __init__(self) -> None:
        self._buffer = ""
        self._searched = 0

    def __len__(self) -> int:
        return len(self._buffer)

    def clear(self) -> None:
        """Forget what has arrived."""
        self._buffer, self._searched = "", 0

    def feed(self, data: bytes, *, end: bool) -> list[str]:
        """Add bytes and return the messages that are complete, as Latin-1 text.

        Raises ScpiError -363 (and forgets everything) where an unfinished message grows beyond the limit.
        """
        self._buffer += data.decode("latin-1")
        messages = self._complete()
        if end and self._buffer:
            messages.append(self._buffer)
            self.clear()
        if len(self._buffer) > INPUT_LIMIT:
            self.clear()
            raise ScpiError(-363)
        return messages

    def _complete(self) -> list[str]:
        messages: list[str] = []
        while (end := self._terminator()) >= 0:
            messages.append(self._buffer[:end])
            self._buffer, self._searched = self._buffer[end + 1 :], 0
        return messages

    def _terminator(self) -> int:
        """Return the position of the line feed that ends the first message, or -1."""
        while True:
            feed = self._buffer.find("\n", self._searched)
            hash_at = self._buffer.find("#", self._searched, feed if feed >= 0 else len(self._buffer))
            if hash_at < 0:
                self._searched = feed if feed >= 0 else len(self._buffer)
                return feed
            end = self._past_block(hash_at)
            if end > len(self._buffer):
                self._searched = hash_at
                return -1
            self._searched = end

    def _past_block(self, hash_at: int) -> int:
        """Return where the block at `hash_at` ends: just past the mark if it is none, beyond the buffer if unknown."""
        header = self._buffer[hash_at + 1 : hash_at + 11]
        if not header:
            return len(self._buffer) + 1
        if header[0] not in "123456789":
            return hash_at + 1
        length = header[1 : 1 + int(header[0])]
        if len(length) < int(header[0]) and length.isdecimal() | (not length):
            return len(self._buffer) + 1
        try:
            return block_span(self._buffer, hash_at)[1]
        except ScpiError:
            return hash_at + 1
