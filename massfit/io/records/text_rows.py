"""Columns of a block of rows: at once where every row has one plain form, else by a general parser."""

from csv import QUOTE_NONE
from dataclasses import replace
from functools import cached_property
from io import BytesIO

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from massfit.errors import Fault, InputError, collect
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.text_blocks import Block
from massfit.io.records.text_layout import KIND, TextLayout
from massfit.io.records.text_stamps import Stamps, fixed_decimals, fixed_iso, fixed_parts, stamps_of
from massfit.io.records.text_time import joined_date, line_fault

_OF_FLAGS = 'Correct it, call a column of letters `kind` and state `keep_kinds`, or flag_variable = "none"'


class Rows:
    """Rows of a block that are of the kinds that are kept.

    Parameters
    ----------
    block : Block
        Of one row at least.
    layout : TextLayout
    entry : DeploymentFile
    """

    def __init__(self, block: Block, layout: TextLayout, entry: DeploymentFile) -> None:
        self.block, self.layout, self.entry = block, layout, entry
        kept = None if entry.keep_kinds is None else self._of_kinds(entry.keep_kinds)
        self._kept = None if kept is None or kept.all() else kept
        self.lines = block.lines if self._kept is None else block.lines[self._kept]
        self.places = np.arange(block.lines.size) if self._kept is None else np.flatnonzero(self._kept)

    def numbers(self, name: str) -> NDArray[np.float64]:
        """Numbers of a column, (n,) float64; an empty field is missing, a word is a fault."""
        letters = self._letters(name)
        values = None if letters is None else fixed_decimals(letters)
        return self._parsed_numbers(name) if values is None else values

    def whole_numbers(self, name: str) -> NDArray[np.float64]:
        """Whole numbers of a column, (n,) float64, or empty ones."""
        allowed, action = "Must be a whole number, or empty", _OF_FLAGS
        try:
            values = self.numbers(name)
        except InputError as error:
            raise InputError([replace(fault, allowed=allowed, action=action) for fault in error.faults]) from error
        good = np.isnan(values) | (values == np.floor(values))
        if not good.all():
            raise InputError(line_fault(self.entry.file, name, values, good, self.lines, allowed, action))
        return values

    def stamps(self) -> Stamps:
        """Read the times of the rows."""
        time = self._fixed_times() if self.entry.time_format in (None, "iso") else None
        if time is not None:
            return Stamps(time)
        if self.layout.time:
            texts = self._table[self.layout.time[0]]
            for name in self.layout.time[1:]:
                texts = texts + " " + self._table[name]
            return stamps_of(texts, self.lines, self.entry, name=" ".join(self.layout.time))
        faults: list[Fault] = []
        parts: dict[str, NDArray[np.float64]] = {}
        for part in self.layout.date:
            with collect(faults):
                parts[part] = self._parsed_numbers(part)
        if faults:
            raise InputError(faults)
        sixties = int(np.count_nonzero(parts["second"] >= 60.0)) if "second" in parts else 0
        return Stamps(joined_date(parts, self.lines, source=self.entry.file), sixties=sixties)

    def _letters(self, name: str) -> NDArray[np.uint8] | None:
        letters = self.block.letters(self.layout.names.index(name))
        return letters if letters is None or self._kept is None else letters[self._kept]

    def _fixed_times(self) -> NDArray[np.datetime64] | None:
        """Read times of one plain form without making text of each; None where it takes more than that."""
        columns = {name: self._letters(name) for name in (*self.layout.time, *self.layout.date)}
        known = {name: letters for name, letters in columns.items() if letters is not None}
        if len(known) < len(columns) or not self.lines.size:
            return None
        if self.layout.date:
            return fixed_parts(known)
        return fixed_iso(next(iter(known.values()))) if len(known) == 1 else None

    def _of_kinds(self, kinds: tuple[str, ...]) -> NDArray[np.bool_]:
        letters = self.block.letters(self.layout.names.index(KIND))
        if letters is not None and letters.shape[1]:
            texts = np.ascontiguousarray(letters).view(f"S{letters.shape[1]}").ravel()
            return np.isin(texts, [kind.encode() for kind in kinds])
        found = self._whole_table[KIND]
        wanted = [str(kind).strip() in kinds for kind in found.cat.categories]
        codes = found.cat.codes.to_numpy()
        return np.asarray(np.append(wanted, False)[codes])  # -1, a kind that is missing, is the last

    def _parsed_numbers(self, name: str) -> NDArray[np.float64]:
        column = self._table[name]
        values = pd.to_numeric(column, errors="coerce").to_numpy(dtype=np.float64, copy=True)
        good = np.isfinite(values) | column.isna().to_numpy()
        if not good.all():
            texts = column.to_numpy(dtype=object)
            allowed = "Must be a number, or empty"
            raise InputError(line_fault(self.entry.file, name, texts, good, self.lines, allowed))
        return values

    @cached_property
    def _table(self) -> pd.DataFrame:
        return self._whole_table if self._kept is None else self._whole_table[self._kept]

    @cached_property
    def _whole_table(self) -> pd.DataFrame:
        # names may repeat among the columns that are not used
        names = self.layout.names
        positions = [names.index(name) for name in self.layout.used]
        types = {names.index(name): "str" for name in self.layout.time}
        types |= {position: "category" for position in positions if names[position] == KIND}
        try:
            table: pd.DataFrame = pd.read_csv(
                BytesIO(self.block.text),
                sep=r"\s+" if self.entry.delimiter is None else self.entry.delimiter,
                header=None,
                usecols=positions,
                dtype=types,
                skipinitialspace=True,
                skip_blank_lines=False,
                quoting=QUOTE_NONE,
                low_memory=False,
                engine="c",
            )
        except ValueError as error:
            problem = f"the rows cannot be parsed ({str(error).splitlines()[0]})"
            line = int(self.block.lines[0])
            raise InputError(Fault(self.entry.file, "", problem, "Must be plain text", line=line)) from error
        table.columns = pd.Index([names[position] for position in sorted(set(positions))])
        return table.set_index(pd.Index(self.block.lines))
