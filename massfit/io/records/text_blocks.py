"""Rows of a text file, a bounded number of bytes at a time: as they stand where all are alike, else line by line."""

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO

import numpy as np
from numpy.typing import NDArray

from massfit.errors import InputError
from massfit.io.records.text_layout import LONGEST_LINE, is_data, long_line_fault

BLOCK_BYTES = 4_000_000
_BYTE_ORDER_MARK = b"\xef\xbb\xbf"
_STEERING = bytes(byte for byte in range(0x20) if byte not in b"\t\n")
_BLANK, _END = ord(" "), ord("\n")


@dataclass(frozen=True)
class Fields:
    """Where the fields of rows stand that were found to be alike.

    Parameters
    ----------
    raw : (m,) array of uint8
        Text of the rows.
    starts, ends : (n, k) array of int
        Bytes at which the fields begin and end; (k,) where every row has the same length and they count from its
        beginning.
    row_bytes : int
        That length; 0 where rows differ.
    """

    raw: NDArray[np.uint8]
    starts: NDArray[np.int64]
    ends: NDArray[np.int64]
    row_bytes: int = 0

    def letters(self, column: int) -> NDArray[np.uint8] | None:
        """Letters of a column, (n, width), where it has one width."""
        if self.row_bytes:
            return self.raw.reshape(-1, self.row_bytes)[:, self.starts[column] : self.ends[column]]
        starts, ends = self.starts[:, column], self.ends[:, column]
        width = int(ends[0] - starts[0])
        return self.raw[starts[:, None] + np.arange(width)] if (ends - starts == width).all() else None


@dataclass(frozen=True)
class Block:
    """Rows of data that follow each other.

    Parameters
    ----------
    text : bytes
        Rows of the right number of fields, each with its end of line; no quotes.
    lines : (n,) array of int
        Their line numbers.
    counts : (m,) array of int
        Fields of the rows that have another number of them.
    ragged : (m,) array of int
        The line numbers of those.
    fields : Fields, optional
        Where all rows were found to be alike.
    """

    text: bytes
    lines: NDArray[np.int64]
    counts: NDArray[np.int64]
    ragged: NDArray[np.int64]
    fields: Fields | None = None

    def letters(self, column: int) -> NDArray[np.uint8] | None:
        """Letters of a column, (n, width), where all rows are alike and it has one width."""
        return None if self.fields is None else self.fields.letters(column)


_NONE = np.empty(0, dtype=np.int64)


def text_blocks(
    path: Path, *, width: int, delimiter: str | None, comment: str, header_line: int, source: str
) -> Iterator[Block]:
    """Read a text file block by block.

    Parameters
    ----------
    path : pathlib.Path
    width : int
        Fields of a row.
    delimiter : str or None
        None is white space.
    comment : str
        Prefix of lines that are no data.
    header_line : int
        Lines up to this one are no data.
    source : str
        File as the analyst wrote it.

    Yields
    ------
    Block

    Raises
    ------
    InputError
        A line is too long to be a row.
    """
    first = 1
    with path.open("rb") as file:
        for text in _whole_lines(file, source):
            count = text.count(b"\n")
            skipped, body = _without_head(text, max(header_line - first + 1, 0), comment)
            even = _even(body, width, delimiter, comment)
            if even is None:
                yield _uneven(body, first + skipped, width, delimiter, comment, source)
            else:
                body, fields = even
                lines = np.arange(first + skipped, first + count, dtype=np.int64)
                yield Block(body, lines, _NONE, _NONE, fields)
            first += count


def _whole_lines(file: BinaryIO, source: str) -> Iterator[bytes]:
    """Pieces of the file that end with a line; every end of line is a line feed."""
    rest, lines = b"", 0
    while piece := file.read(BLOCK_BYTES):
        if piece.endswith(b"\r"):
            piece += file.read(1)
        if lines == 0 and not rest:
            piece = piece.removeprefix(_BYTE_ORDER_MARK)
        text = rest + (piece.replace(b"\r\n", b"\n").replace(b"\r", b"\n") if b"\r" in piece else piece)
        cut = text.rfind(b"\n") + 1
        rest = text[cut:]
        if len(rest) >= LONGEST_LINE:
            raise InputError(long_line_fault(source, lines + text.count(b"\n") + 1))
        if cut:
            lines += text.count(b"\n", 0, cut)
            yield text[:cut]
    if rest:
        yield rest + b"\n"


def _without_head(text: bytes, header_lines: int, comment: str) -> tuple[int, bytes]:
    """Take the header and what comments follow it off; how many lines, and the rest."""
    at = skipped = 0
    while at < len(text):
        end = text.index(b"\n", at) + 1
        if skipped >= header_lines and is_data(text[at:end].decode("utf-8", "replace"), comment):
            break
        at, skipped = end, skipped + 1
    return skipped, text[at:]


def _even(text: bytes, width: int, delimiter: str | None, comment: str) -> tuple[bytes, Fields] | None:
    """Text without quotes, and where its fields stand; None unless all rows are plain and of one width."""
    if not text or not text.isascii() or (comment and comment.encode() in text):
        return None
    if delimiter is not None and len(delimiter) != 1:
        return None
    if text.translate(None, _STEERING) != text:
        return None
    text = text.replace(b'"', b"") if b'"' in text else text
    raw = np.frombuffer(text, dtype=np.uint8)
    fields = _of_one_length(raw, text.index(b"\n") + 1, width, delimiter)
    if fields is None:
        line_ends = np.flatnonzero(raw == _END)
        if np.diff(line_ends, prepend=-1).max() >= LONGEST_LINE:
            return None
        fields = _by_blanks(raw, line_ends, width) if delimiter is None else _by_marks(raw, line_ends, width, delimiter)
    return None if fields is None else (text, fields)


def _of_one_length(raw: NDArray[np.uint8], length: int, width: int, delimiter: str | None) -> Fields | None:
    """Fields of rows that all have the length of the first, and their delimiters where it has them."""
    if raw.size % length or length >= LONGEST_LINE:
        return None
    rows = raw.reshape(-1, length)
    parting = raw <= _BLANK if delimiter is None else (raw == ord(delimiter)) | (raw == _END)
    parting = parting.reshape(-1, length)
    if not ((rows[:, -1] == _END).all() and (rows[:, :-1] != _END).all() and (parting == parting[0]).all()):
        return None
    if delimiter is None:
        changes = np.flatnonzero(np.diff(np.concatenate([[True], parting[0]]).astype(np.int8)))
        starts, ends = changes[0::2], changes[1::2]
    else:
        ends = np.flatnonzero(parting[0])
        starts = np.concatenate([[0], ends[:-1] + 1])
    return Fields(raw, starts, ends, length) if ends.size == width else None


def _by_marks(raw: NDArray[np.uint8], line_ends: NDArray[np.int64], width: int, delimiter: str) -> Fields | None:
    marks = np.flatnonzero(raw == ord(delimiter))
    if width < 2 or marks.size != line_ends.size * (width - 1):
        return None
    ends = np.column_stack([marks.reshape(-1, width - 1), line_ends])
    starts = np.empty_like(ends)
    starts[:, 1:] = ends[:, :-1] + 1
    starts[0, 0], starts[1:, 0] = 0, line_ends[:-1] + 1
    inside = (ends[:, 0] >= starts[:, 0]).all() and (ends[:, -2] < line_ends).all()
    return Fields(raw, starts, ends) if inside else None


def _by_blanks(raw: NDArray[np.uint8], line_ends: NDArray[np.int64], width: int) -> Fields | None:
    filled = np.zeros(raw.size + 1, dtype=np.int8)
    filled[1:] = raw > _BLANK
    changes = np.flatnonzero(np.diff(filled))
    if changes.size != 2 * line_ends.size * width:
        return None
    starts, ends = changes[0::2].reshape(-1, width), changes[1::2].reshape(-1, width)
    inside = (ends[:, -1] <= line_ends).all() and (starts[1:, 0] > line_ends[:-1]).all()
    return Fields(raw, starts, ends) if inside else None


def _uneven(text: bytes, first: int, width: int, delimiter: str | None, comment: str, source: str) -> Block:
    """Look at every line on its own."""
    lines = text.decode("utf-8", errors="replace").split("\n")[:-1]
    rows = [(number, line) for number, line in enumerate(lines, first) if is_data(line, comment)]
    long = [number for number, line in rows if len(line) >= LONGEST_LINE]
    if long:
        raise InputError(long_line_fault(source, long[0]))
    numbers = np.array([number for number, _ in rows], dtype=np.int64)
    counts = np.array([len(line.split(delimiter)) for _, line in rows], dtype=np.int64)
    good = counts == width
    # a quote that is never closed would swallow lines
    kept = "".join(f"{line}\n" for (_, line), fits in zip(rows, good.tolist(), strict=True) if fits).replace('"', "")
    return Block(kept.encode(), numbers[good], counts[~good], numbers[~good])
