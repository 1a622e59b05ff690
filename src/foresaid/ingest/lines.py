"""Bytes to physical lines to records of cells, streaming and with a limit on each record."""

from __future__ import annotations

import csv
import hashlib
import io
import re
from dataclasses import dataclass
from typing import TYPE_CHECKING, BinaryIO

from foresaid.model.issues import clip

if TYPE_CHECKING:
    from collections.abc import Buffer, Callable, Iterator

LONGEST_RECORD = 1 << 20
"""Characters that one record may have."""

_STEP = 1 << 20
_BAD_BYTE = re.compile("[\udc80-\udcff]")
_BOMS = (
    (b"\xef\xbb\xbf", "utf-8-sig"),
    (b"\xff\xfe\x00\x00", "utf-32"),
    (b"\x00\x00\xfe\xff", "utf-32"),
    (b"\xff\xfe", "utf-16"),
    (b"\xfe\xff", "utf-16"),
)


class Tap(io.RawIOBase):
    """A file that is hashed and measured while it is read."""

    def __init__(
        self, source: BinaryIO, *, total: int = 0, progress: Callable[[int, int], None] | None = None
    ) -> None:
        super().__init__()
        self._source, self._total, self._progress = source, total, progress
        self._digest = hashlib.sha256()
        self._done = self._told = 0

    def readable(self) -> bool:
        """Return True."""
        return True

    def readinto(self, buffer: Buffer) -> int:
        """Read into ``buffer`` and return how many bytes came."""
        data = self._source.read(len(memoryview(buffer)))
        memoryview(buffer)[: len(data)] = data
        self._digest.update(data)
        self._done += len(data)
        if self._progress and (self._done >= self._told + _STEP or not data):
            self._told = self._done
            self._progress(self._done, max(self._total, self._done))
        return len(data)

    def sha256(self) -> str:
        """Return the digest of what was read so far."""
        return self._digest.hexdigest()


def encoding_of(head: bytes) -> str:
    """Return the encoding that the first bytes of a file announce, UTF-8 without a mark."""
    return next((name for mark, name in _BOMS if head.startswith(mark)), "utf-8")


@dataclass(frozen=True, slots=True)
class Fault:
    """Why a record could not be split or trusted."""

    code: str
    message: str
    hint: str


@dataclass(frozen=True, slots=True)
class Record:
    """One row: the line it starts on, its cells, and what is wrong with its text."""

    line: int
    cells: list[str]
    fault: Fault | None = None


class Lines:
    """The physical lines of a text stream, counted from 1; lines can be given back.

    A line longer than the limit comes back cut to one character more than the limit.
    """

    def __init__(self, stream: io.TextIOBase) -> None:
        self._stream = stream
        self._number = 0
        self._returned: list[tuple[int, str]] = []

    def __iter__(self) -> Iterator[tuple[int, str]]:
        """Yield line number and text without its line end."""
        while (line := self.take()) is not None:
            yield line

    def take(self) -> tuple[int, str] | None:
        """Return the next line, None at the end."""
        if self._returned:
            return self._returned.pop()
        text = self._stream.readline(LONGEST_RECORD + 1)
        if not text:
            return None
        self._number += 1
        if text.endswith("\n"):
            return self._number, text[:-1]
        if len(text) > LONGEST_RECORD:
            self._skip_rest()
        return self._number, text

    def give_back(self, lines: list[tuple[int, str]]) -> None:
        """Put lines back so that they come next, in the same order."""
        self._returned += reversed(lines)

    def _skip_rest(self) -> None:
        while (rest := self._stream.readline(LONGEST_RECORD)) and not rest.endswith("\n"):
            pass


def records(lines: Lines, delimiter: str, *, replaced: bool = False) -> Iterator[Record]:
    """Yield the records of a file; blank lines are left out.

    Parameters
    ----------
    lines : Lines
        Where the text comes from.
    delimiter : str
        One character.
    replaced : bool
        Whether bytes that could not be decoded stand as U+FFFD already (UTF-16, UTF-32).
    """
    for line in lines:
        number, text = line
        if '"' in text:
            record = _quoted(lines, line, delimiter)
        elif text and not text.isspace():
            record = Record(number, text.split(delimiter))
        else:
            continue
        if len(text) > LONGEST_RECORD:
            yield Record(number, [text[:80]], _too_long())
        elif record.fault is None and (fault := _text_fault(record.cells, delimiter, replaced)):
            yield Record(number, record.cells, fault)
        else:
            yield record


def _text_fault(cells: list[str], delimiter: str, replaced: bool) -> Fault | None:  # noqa: FBT001
    text = delimiter.join(cells)
    if "\0" in text:
        hint = "Save the file as CSV in UTF-8."
        return Fault("nul-byte", "the row holds a NUL byte: this is no plain text", hint)
    if text.isascii():
        return None
    bad = _BAD_BYTE.search(text)
    if bad is not None:
        before = clip(text[max(bad.start() - 20, 0) : bad.start()])
        message = f"byte 0x{ord(bad[0]) - 0xDC00:02X} after `{before}` is not UTF-8"
        return Fault("bad-encoding", message, "Save the file as CSV in UTF-8.")
    if replaced and "\ufffd" in text:
        message = "some bytes of the row stand for no letter"
        return Fault("bad-encoding", message, "Save the file as CSV in UTF-8.")
    return None


def _too_long() -> Fault:
    message = f"the row is longer than {LONGEST_RECORD:,} characters"
    return Fault("line-too-long", message, "Check the line ends and the quotes before it.")


# ----------------------------------------------------------------------------- quoted cells
def _quoted(lines: Lines, line: tuple[int, str], delimiter: str) -> Record:
    """Return the record that starts on a line with a quote in it."""
    number, text = line
    if len(text) > LONGEST_RECORD:
        return Record(number, [])
    try:
        cells = next(csv.reader([text], delimiter=delimiter, skipinitialspace=True, strict=True))
    except csv.Error:
        return _spanning(lines, line, delimiter)
    return Record(number, cells)


def _spanning(lines: Lines, line: tuple[int, str], delimiter: str) -> Record:
    """Return a record whose quoted cells may span lines.

    Where the quotes do not work out, the first line alone is at fault and the others are
    given back, so that one stray quote does not swallow the rest of the file.
    """
    splitter, size, more = _Splitter(delimiter), 0, []
    current: tuple[int, str] | None = line
    while current is not None and size <= LONGEST_RECORD:
        size += len(current[1]) + 1
        if current is not line:
            more.append(current)
        if splitter.feed(current[1]):
            break
        current = lines.take()
    if splitter.is_done:
        return Record(line[0], splitter.cells)
    if current is not None and size > LONGEST_RECORD and current not in more[-1:]:
        more.append(current)
    lines.give_back(more)
    return Record(line[0], line[1].split(delimiter), splitter.fault(line[0], current))


class _Splitter:
    """Cells of one record, fed line by line; knows whether a quote is open."""

    def __init__(self, delimiter: str) -> None:
        self.cells: list[str] = []
        self.is_done = False
        self.stray = ""
        self._delimiter = delimiter
        self._open: list[str] | None = None

    def feed(self, text: str) -> bool:
        """Take one more line; return whether the record ends here, well or badly."""
        if self._open is not None:
            self._open.append("\n")
        position = 0
        while position <= len(text):
            position = self._cell(text, position)
            if self.stray:
                return True
            if self._open is not None:
                return False
        self.is_done = True
        return True

    def _cell(self, text: str, start: int) -> int:
        """Take one cell and return where the next one starts."""
        if self._open is None:
            begin = start
            while begin < len(text) and text[begin] == " ":
                begin += 1
            if text[begin : begin + 1] != '"':
                return self._plain(text, start)
            self._open, start = [], begin + 1
        return self._rest_of_quoted(text, start)

    def _plain(self, text: str, start: int) -> int:
        end = text.find(self._delimiter, start)
        end = len(text) if end < 0 else end
        self.cells.append(text[start:end])
        return end + 1

    def _rest_of_quoted(self, text: str, start: int) -> int:
        pieces = self._open if self._open is not None else []
        end = text.find('"', start)
        while end >= 0 and text[end + 1 : end + 2] == '"':
            pieces.append(text[start : end + 1])
            start = end + 2
            end = text.find('"', start)
        if end < 0:
            pieces.append(text[start:])
            return len(text) + 1
        pieces.append(text[start:end])
        return self._close("".join(pieces), text, end + 1)

    def _close(self, cell: str, text: str, start: int) -> int:
        """Finish a quoted cell: only blanks may stand between its quote and the delimiter."""
        end = text.find(self._delimiter, start)
        end = len(text) if end < 0 else end
        self._open = None
        self.cells.append(cell)
        if text[start:end].strip():
            self.stray = text[start:end]
        return end + 1

    def fault(self, line: int, last: tuple[int, str] | None) -> Fault:
        """Return why the record that started on ``line`` could not be finished."""
        if self.stray:
            where = f" on line {last[0]}" if last is not None and last[0] != line else ""
            message = f"a quote is closed{where} and `{clip(self.stray)}` follows it"
            return Fault("stray-quote", message, 'Double a quote inside a quoted cell: "".')
        message = f"a quote is opened on line {line} and never closed"
        return Fault("open-quote", message, "Close it, or take it out.")
