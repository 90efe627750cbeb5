"""Reading an export as it stands: every cell as text, every row numbered.

Rows that do not have as many cells as the head are kept aside with their text. Row
numbers count records with the head as the first, as a spreadsheet shows them; lines
left wholly blank are not rows.
"""

from __future__ import annotations

import codecs
import csv
import os
from collections import Counter
from dataclasses import dataclass
from functools import partial
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.csv as pa_csv
import pyarrow.parquet as pa_parquet

from engine.errors import SourceUnreadable

_DELIMITERS = ",;\t|"
# One record may not be longer than this; an unclosed quotation mark would be.
_BLOCK_BYTES = 16 * 1024 * 1024
_CHUNK_BYTES = 1024 * 1024


@dataclass(frozen=True)
class BrokenRow:
    """A row whose cells do not fit the head."""

    row: int
    cells: int
    expected: int
    text: str


@dataclass(frozen=True)
class Source:
    """One export: its cells as text, the row each came from, the rows that broke."""

    name: str
    heads: tuple[str, ...]
    cells: pa.Table
    rows: np.ndarray
    broken: tuple[BrokenRow, ...]
    encoding: str

    @property
    def rows_read(self) -> int:
        """Rows under the head, whole or broken."""
        return len(self.rows) + len(self.broken)


def read_source(path: str | os.PathLike[str]) -> Source:
    """An export from a .csv, .txt, .tsv or .parquet file.

    Raises   SourceUnreadable, one line naming the file and what is wrong with it.
    """
    path = Path(path)
    try:
        if path.is_dir():
            raise SourceUnreadable(f"{path} is a folder; name the files in it")
        if path.stat().st_size == 0:
            raise SourceUnreadable(f"{path} is empty; it needs a row of column names")
        if path.suffix.lower() == ".parquet":
            return _read_parquet(path)
        if path.suffix.lower() in {".csv", ".txt", ".tsv"}:
            return _read_csv(path)
    except FileNotFoundError:
        raise SourceUnreadable(f"{path} does not exist; check the name") from None
    except (OSError, pa.ArrowException) as error:
        reason = str(getattr(error, "strerror", None) or error).splitlines()[0]
        raise SourceUnreadable(f"{path} cannot be read: {reason}") from None
    raise SourceUnreadable(
        f"{path} is of a kind not taken in; save it as .csv or .parquet"
    )


def _read_csv(path: Path) -> Source:
    encoding = _encoding(path)
    broken: list[BrokenRow] = []

    def keep_aside(row: pa_csv.InvalidRow) -> str:
        broken.append(
            BrokenRow(row.number, row.actual_columns, row.expected_columns, row.text)
        )
        return "skip"

    heads, delimiter = _head(path, encoding)
    _refuse_open_quotes(path, encoding, delimiter)
    columns = [f"c{i}" for i in range(len(heads))]
    try:
        cells = pa_csv.read_csv(
            path,
            read_options=pa_csv.ReadOptions(
                use_threads=False,  # row numbers are given only then
                block_size=_BLOCK_BYTES,
                encoding=encoding,
                column_names=columns,
            ),
            parse_options=pa_csv.ParseOptions(
                delimiter=delimiter,
                newlines_in_values=True,
                invalid_row_handler=keep_aside,
            ),
            convert_options=pa_csv.ConvertOptions(
                column_types=dict.fromkeys(columns, pa.string()),
                null_values=[""],
                strings_can_be_null=True,
                quoted_strings_can_be_null=True,
            ),
        )
    except pa.ArrowInvalid as error:
        if "straddling" in str(error):
            raise SourceUnreadable(
                f"{path}: a row is too long; a quotation mark may not be closed"
            ) from None
        raise
    numbers = np.arange(1, len(cells) + len(broken) + 1)
    numbers = np.setdiff1d(numbers, [row.row for row in broken])[1:]
    cells = cells.slice(1)
    swallowed = _swallowed(cells, delimiter)
    for place in np.flatnonzero(swallowed).tolist():
        text = delimiter.join(str(cells[c][place]) for c in columns)
        found = text.count(delimiter) + 1
        broken.append(BrokenRow(int(numbers[place]), found, len(heads), text))
    kept = cells.filter(pa.array(~swallowed))
    return Source(path.name, heads, kept, numbers[~swallowed], tuple(broken), encoding)


def _refuse_open_quotes(path: Path, encoding: str, delimiter: str) -> None:
    """A file that ends inside quotation marks holds rows that look like one cell."""
    with path.open("rb") as file:
        marks = sum(
            chunk.count(b'"') for chunk in iter(partial(file.read, _CHUNK_BYTES), b"")
        )
    if marks % 2 == 0:
        return
    with path.open(encoding=encoding, newline="") as lines:
        reader = csv.reader(lines, delimiter=delimiter, strict=True)
        try:
            for _ in reader:
                pass
        except csv.Error:
            raise SourceUnreadable(
                f"{path}: a quotation mark is not closed, near line {reader.line_num}"
            ) from None


def _swallowed(cells: pa.Table, delimiter: str) -> np.ndarray:
    """Rows with a cell that holds a line with as many columns as the file: a
    quotation mark opened there has taken in the rows after it."""
    found = np.zeros(len(cells), bool)
    others = cells.num_columns - 1
    if others < 2:
        return found
    for column in cells.columns:
        broken_over = pc.match_substring(column, "\n").fill_null(False)
        for place in np.flatnonzero(
            broken_over.to_numpy(zero_copy_only=False)
        ).tolist():
            lines = str(column[place]).splitlines()[1:]
            found[place] |= any(line.count(delimiter) >= others for line in lines)
    return found


def _read_parquet(path: Path) -> Source:
    table = pa_parquet.read_table(path)
    heads = _checked_heads(table.column_names, path)
    texts = []
    for name, column in zip(table.column_names, table.columns, strict=True):
        if pa.types.is_dictionary(column.type):
            column = column.cast(column.type.value_type)
        try:
            texts.append(_text(column))
        except pa.ArrowException:
            raise SourceUnreadable(
                f"{path}: column {name} holds {column.type}, not single values"
            ) from None
    cells = pa.table(texts, names=[f"c{i}" for i in range(len(heads))])
    return Source(path.name, heads, cells, np.arange(len(cells)) + 1, (), "parquet")


def _text(column: pa.ChunkedArray) -> pa.ChunkedArray:
    if pa.types.is_timestamp(column.type) and column.type.tz:
        column = column.cast(pa.timestamp("us", "UTC"), safe=False)
    if pa.types.is_binary(column.type) or pa.types.is_large_binary(column.type):
        raise pa.ArrowInvalid("bytes are no text")
    return column.cast(pa.string())


def _encoding(path: Path) -> str:
    """utf-8 (with or without its mark) where the bytes are valid, else cp1252."""
    with path.open("rb") as file:
        head = file.read(_CHUNK_BYTES)
    if head[:2] in {b"\xff\xfe", b"\xfe\xff"} or b"\0" in head:
        raise SourceUnreadable(f"{path} is not UTF-8 but wider text; save it as UTF-8")
    for encoding in ("utf-8", "cp1252"):
        decoder = codecs.getincrementaldecoder(encoding)()
        try:
            with path.open("rb") as file:
                while chunk := file.read(_CHUNK_BYTES):
                    decoder.decode(chunk)
                decoder.decode(b"", final=True)
        except UnicodeDecodeError:
            continue
        return encoding
    raise SourceUnreadable(
        f"{path} is neither UTF-8 nor Windows text; save it as UTF-8"
    )


def _head(path: Path, encoding: str) -> tuple[tuple[str, ...], str]:
    text_encoding = "utf-8-sig" if encoding == "utf-8" else encoding
    with path.open(encoding=text_encoding, newline="") as file:
        line = file.readline(_CHUNK_BYTES)
        delimiter = max(_DELIMITERS, key=line.count)
        file.seek(0)
        try:
            heads = next(csv.reader(file, delimiter=delimiter), [])
        except csv.Error as error:
            raise SourceUnreadable(
                f"{path}: the head cannot be read: {error}"
            ) from None
    return _checked_heads(heads, path), delimiter


def _checked_heads(heads: list[str], path: Path) -> tuple[str, ...]:
    plain = tuple(head.strip() for head in heads)
    if not any(plain):
        raise SourceUnreadable(f"{path} has no row of column names at its beginning")
    counts = Counter(head.lower() for head in plain if head)
    twice = [head for head, count in counts.items() if count > 1]
    if twice:
        raise SourceUnreadable(f"{path}: two columns are named {twice[0]}")
    return plain
