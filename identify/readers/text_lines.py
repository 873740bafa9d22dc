"""Bytes → lines of text: encodings, line ends and bounds in one place for all text readers."""

from __future__ import annotations

import codecs
import io
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import BinaryIO

from identify.errors import FormatError
from identify.readers.limits import CHUNK_BYTES, HEAD_BYTES, LINE_OVERHEAD_BYTES, MAX_LINE_BYTES, MAX_RECORD_BYTES

_BYTE_ORDER_MARKS = (
    (codecs.BOM_UTF8, "utf-8"),
    (codecs.BOM_UTF32_LE, "utf-32-le"),
    (codecs.BOM_UTF32_BE, "utf-32-be"),
    (codecs.BOM_UTF16_LE, "utf-16-le"),
    (codecs.BOM_UTF16_BE, "utf-16-be"),
)
_TEXT_CONTROLS = b"\t\n\r\f\x1a"
_CONTROLS = bytes(byte for byte in range(32) if byte not in _TEXT_CONTROLS) + b"\x7f"
ASSUMED_ENCODING = "not valid UTF-8; read as Windows-1252, so letters outside ASCII may be wrong"
"""Note that `identify.readers` puts into `extra["encoding"]` of the records concerned."""


class PeekedStream(io.RawIOBase):
    """A binary stream whose first bytes can be looked at before it is read.

    Parameters
    ----------
    stream : file object
        Read forward only; closed by whoever opened it.
    """

    def __init__(self, stream: BinaryIO) -> None:
        super().__init__()
        self._stream = stream
        parts: list[bytes] = []
        wanted = HEAD_BYTES
        while wanted and (part := stream.read(wanted)):
            parts.append(part)
            wanted -= len(part)
        self.head = b"".join(parts)
        self._unread = self.head

    def readable(self) -> bool:
        """True."""
        return True

    def read(self, size: int | None = -1) -> bytes:
        """At most `size` bytes (all for a negative size); empty at the end."""
        if not self._unread:
            return self._stream.read(-1 if size is None else size)
        if size is None or size < 0:
            data, self._unread = self._unread + self._stream.read(), b""
            return data
        data, self._unread = self._unread[:size], self._unread[size:]
        return data


def find_byte_order_mark(head: bytes) -> tuple[str, int]:
    """Encoding a byte order mark names, and its length in bytes; ``("", 0)`` without one.

    Examples
    --------
    >>> find_byte_order_mark(b"\\xef\\xbb\\xbfName")
    ('utf-8', 3)
    """
    for mark, encoding in _BYTE_ORDER_MARKS:
        if head.startswith(mark):
            return encoding, len(mark)
    return "", 0


def is_binary(head: bytes) -> bool:
    """True where `head`, the first bytes of a file, holds control bytes that no text has.

    Examples
    --------
    >>> is_binary(b"43 100\\r\\n"), is_binary(b"CDF\\x01\\x00")
    (False, True)
    """
    encoding, _ = find_byte_order_mark(head)
    if encoding[:6] in ("utf-16", "utf-32"):
        return False
    return len(head.translate(None, _CONTROLS)) != len(head)


class LineDecoder:
    """Lines of a byte stream, one pass.

    UTF-8 with or without byte order mark, UTF-16 and UTF-32 with one. A line that is not valid UTF-8 is read as
    Windows-1252 (`is_assumed` becomes True): structure and numbers of all formats are ASCII, only names can suffer.
    Line ends are LF, CR LF or CR.

    Parameters
    ----------
    stream : PeekedStream
        Bytes.
    path : str
        File, for messages.
    """

    def __init__(self, stream: PeekedStream, path: str) -> None:
        self._stream = stream
        self._path = path
        self.is_assumed = False

    def __iter__(self) -> Iterator[str]:
        """Lines without their ends.

        Raises
        ------
        FormatError
            For a line longer than `MAX_LINE_BYTES`, or bytes that fit no encoding above.
        """
        encoding, mark_length = find_byte_order_mark(self._stream.head)
        self._stream.read(mark_length)
        wide = encoding not in ("", "utf-8")
        decoder = codecs.getincrementaldecoder(encoding)("strict") if wide else None
        line_number = 1
        rest = b""
        while True:
            chunk = self._stream.read(CHUNK_BYTES)
            is_last = not chunk
            if decoder is not None:
                chunk = self._recode(decoder, chunk, is_last)
            data = rest + chunk
            end = len(data) if is_last else _last_line_end(data)
            rest = data[end:]
            if len(rest) > MAX_LINE_BYTES:
                raise self._too_long(line_number + data.count(b"\n", 0, end))
            lines = self._decode(data[:end]).split("\n")
            last_line = lines.pop()
            yield from lines
            line_number += len(lines)
            if is_last:
                if last_line:
                    yield last_line
                return

    def _decode(self, data: bytes) -> str:
        try:
            text = data.decode("utf-8")
        except UnicodeDecodeError:
            text = "\n".join([self._decode_line(line) for line in data.split(b"\n")])
        return text.replace("\r\n", "\n").replace("\r", "\n") if "\r" in text else text

    def _decode_line(self, line: bytes) -> str:
        try:
            return line.decode("utf-8")
        except UnicodeDecodeError:
            self.is_assumed = True
            return line.decode("cp1252", "backslashreplace")

    def _recode(self, decoder: codecs.IncrementalDecoder, chunk: bytes, is_last: bool) -> bytes:
        try:
            return decoder.decode(chunk, is_last).encode("utf-8")
        except UnicodeError:
            raise FormatError(
                "text encoding",
                where=self._path,
                found="bytes that its byte order mark does not allow",
                expected="UTF-8, or UTF-16 with a byte order mark",
            ) from None

    def _too_long(self, line_number: int) -> FormatError:
        return FormatError(
            "line",
            where=f"{self._path}:{line_number}",
            found=f"more than {MAX_LINE_BYTES} bytes",
            expected=f"lines of at most {MAX_LINE_BYTES} bytes",
        )


@dataclass(slots=True)
class RecordLines:
    """Consecutive lines of one record while they come in, within `MAX_RECORD_BYTES`; what is more is passed over.

    False while there is none.
    """

    lines: list[str] = field(default_factory=list)
    first_line: int = 0
    last_line: int = 0
    n_bytes: int = 0

    def __bool__(self) -> bool:
        return bool(self.lines)

    def add(self, line: str, line_number: int) -> None:
        """Take one more line."""
        self.n_bytes += len(line) + LINE_OVERHEAD_BYTES
        self.first_line = self.first_line or line_number
        self.last_line = line_number
        if self.n_bytes <= MAX_RECORD_BYTES:
            self.lines.append(line)

    def refuse_if_full(self, path: str) -> None:
        """Refuse a record that did not fit.

        Parameters
        ----------
        path : str
            File, for the message.

        Raises
        ------
        FormatError
            If a line was passed over.
        """
        if self.n_bytes > MAX_RECORD_BYTES:
            raise FormatError(
                "record",
                where=f"{path}:{self.first_line}",
                found=f"more than {MAX_RECORD_BYTES} bytes",
                expected="one spectrum with its metadata",
                hint="Profile data must be centroided; else the mark between two records may be missing.",
            )


def _last_line_end(data: bytes) -> int:
    """Position behind the last complete line of `data`; a final CR may be half of a CR LF."""
    end = data.rfind(b"\n") + 1
    return end or data.rfind(b"\r", 0, len(data) - 1) + 1
