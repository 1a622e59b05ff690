"""One record with quoted cells, split line by line."""

from __future__ import annotations

from dataclasses import dataclass

from foresaid.model.issues import clip


@dataclass(frozen=True, slots=True)
class Fault:
    """Why a record could not be split or trusted."""

    code: str
    message: str
    hint: str


class Splitter:
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

    def fault(self, line: int, last: int) -> Fault:
        """Return why the record that started on ``line`` could not be finished."""
        if self.stray:
            where = f" on line {last}" if last != line else ""
            message = f"a quote is closed{where} and `{clip(self.stray)}` follows it"
            return Fault("stray-quote", message, 'Double a quote inside a quoted cell: "".')
        message = f"a quote is opened on line {line} and never closed"
        return Fault("open-quote", message, "Close it, or take it out.")
