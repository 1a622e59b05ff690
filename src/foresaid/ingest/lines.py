"""Bytes to physical lines to records of cells, streaming and with a limit on each record."""

from __future__ import annotations

import csv
import hashlib
import io
import re
from itertools import chain, repeat
from typing import TYPE_CHECKING, BinaryIO, NamedTuple

from foresaid.ingest.quotes import Fault, Splitter
from foresaid.model.issues import clip

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

    from _typeshed import WriteableBuffer

LONGEST_RECORD = 1 << 20
"""Characters that one record may have."""

_STEP = 1 << 20
_BLOCK = 1 << 18
_BAD_BYTE = re.compile("[\udc80-\udcff]")
_SUSPECT = re.compile("[\udc80-\udcff\ufffd]")
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
        self,
        source: BinaryIO,
        *,
        total: int = 0,
        progress: Callable[[int, int], None] | None = None,
    ) -> None:
        self._source, self._total, self._progress = source, total, progress
        self._digest = hashlib.sha256()
        self._done = self._told = 0

    def readable(self) -> bool:
        """Return True."""
        return True

    def readinto(self, buffer: WriteableBuffer) -> int:
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


class Record(NamedTuple):
    """One row: the line it starts on, its cells, and what is wrong with its text."""

    line: int
    cells: list[str]
    fault: Fault | None = None


class Lines:
    """The physical lines of a text stream, counted from 1; lines can be given back.

    A line longer than the limit comes back cut, and still longer than the limit.
    """

    def __init__(self, stream: io.TextIOBase) -> None:
        self._stream = stream
        self._number = 0
        self._pending: list[tuple[int, str]] = []

    def __iter__(self) -> Iterator[tuple[int, str]]:
        """Yield line number and text without its line end."""
        while (line := self.take()) is not None:
            yield line

    @property
    def has_pending(self) -> bool:
        """Whether lines that were read from the stream wait to be taken."""
        return bool(self._pending)

    def take(self) -> tuple[int, str] | None:
        """Return the next line, None at the end."""
        if not self._pending:
            block = self._block()
            self._hold(block.removesuffix("\n").split("\n") if block else [])
        return self._pending.pop() if self._pending else None

    def give_back(self, lines: list[tuple[int, str]]) -> None:
        """Put lines back so that they come next, in the same order."""
        self._pending += reversed(lines)

    def take_plain(self, delimiter: str, width: int) -> tuple[int, list[str]] | None:
        """Return a whole block of well-formed rows, None where rows must be read singly.

        Returns
        -------
        tuple of int and list of str, or None
            The number of the first line, and all cells row after row.
        """
        if self._pending:
            return None
        text = self._block()
        block = text.removesuffix("\n")
        lines = block.split("\n")
        cells = _plain_cells(block, lines, delimiter, width)
        if cells is None:
            self._hold(lines if text else [])
            return None
        first = self._number + 1
        self._number += len(lines)
        return first, cells

    def _hold(self, texts: list[str]) -> None:
        """Keep lines for ``take``."""
        first = self._number + 1
        self._number += len(texts)
        self._pending = list(zip(range(first, self._number + 1), texts, strict=True))[::-1]

    def _block(self) -> str:
        """Return some whole lines with their ends; empty at the end of the file."""
        text = self._stream.read(_BLOCK)
        if text and not text.endswith("\n"):
            rest = self._stream.readline(LONGEST_RECORD + 1)
            text += rest
            if len(rest) > LONGEST_RECORD and not rest.endswith("\n"):
                self._skip_rest()
        return text

    def _skip_rest(self) -> None:
        while (rest := self._stream.readline(LONGEST_RECORD)) and not rest.endswith("\n"):
            pass


def _plain_cells(block: str, lines: list[str], delimiter: str, width: int) -> list[str] | None:
    """Return the cells of a block row after row, None where any line is not a plain row."""
    if not _is_plain(block, delimiter):
        return None
    if '"' in block:
        return _quoted_cells(lines, delimiter, width)
    if set(map(str.count, lines, repeat(delimiter))) != {width - 1}:
        return None
    return block.replace("\n", delimiter).split(delimiter)


def _quoted_cells(lines: list[str], delimiter: str, width: int) -> list[str] | None:
    """Return the cells of lines with quotes, if every line is a row of its own."""
    reader = csv.reader(lines, delimiter=delimiter, skipinitialspace=True, strict=True)
    try:
        rows = list(reader)
    except csv.Error:
        return None
    if len(rows) != len(lines) or set(map(len, rows)) != {width}:
        return None
    if not all(row[0].strip() for row in rows):
        return None
    return list(chain.from_iterable(rows))


def _is_plain(block: str, delimiter: str) -> bool:
    """Return whether a block is text, of lines that are not too long and surely not blank."""
    if "\0" in block or len(block) > LONGEST_RECORD:
        return False
    if not block or block[0] in " \t" + delimiter:
        return False
    if any("\n" + mark in block for mark in {" ", "\t", "\n", delimiter}):
        return False
    return block.isascii() or not _SUSPECT.search(block)


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
        if len(text) > LONGEST_RECORD:
            yield Record(number, [text[:80]], _too_long())
        elif '"' in text:
            record = _quoted(lines, line, delimiter)
            fault = record.fault or _text_fault("".join(record.cells), replaced=replaced)
            yield Record(number, record.cells, fault)
        elif text and not text.isspace():
            fault = _text_fault(text, replaced=replaced)
            yield Record(number, text.split(delimiter), fault)


def _text_fault(text: str, *, replaced: bool) -> Fault | None:
    if "\0" in text:
        hint = "Save the file as CSV in UTF-8."
        return Fault("nul-byte", "the row holds a NUL byte: this is no plain text", hint)
    if text.isascii():
        return None
    bad = _BAD_BYTE.search(text)
    if bad is not None:
        before = clip(text[max(bad.start() - 20, 0) : bad.start()])
        place = f" after `{before}`" if before else ""
        message = f"byte 0x{ord(bad[0]) - 0xDC00:02X}{place} is not UTF-8"
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
    try:
        cells = next(
            csv.reader([text], delimiter=delimiter, skipinitialspace=True, strict=True)
        )
    except csv.Error:
        return _spanning(lines, line, delimiter)
    return Record(number, cells)


def _spanning(lines: Lines, line: tuple[int, str], delimiter: str) -> Record:
    """Return a record whose quoted cells may span lines.

    Where the quotes do not work out, the first line alone is at fault and the others are
    given back, so that one stray quote does not swallow the rest of the file.
    """
    splitter, more = Splitter(delimiter), list[tuple[int, str]]()
    size, current = len(line[1]), line
    while size <= LONGEST_RECORD and not splitter.feed(current[1]):
        following = lines.take()
        if following is None:
            break
        more.append(following)
        size += len(following[1]) + 1
        current = following
    if splitter.is_done:
        return Record(line[0], splitter.cells)
    lines.give_back(more)
    return Record(line[0], line[1].split(delimiter), splitter.fault(line[0], current[0]))
