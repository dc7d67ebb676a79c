"""Opening data files: what stands in a file as text cells, or one clear line why it cannot be read."""

from __future__ import annotations

import codecs
import csv
import difflib
import io
import re
from collections.abc import Iterable, Iterator, Mapping

import pandas as pd

from carrylab.errors import DataError, ExtraError
from carrylab.options import Source

SIGNATURES: Mapping[bytes, str] = {
    b"PK\x03\x04": "a zip archive (an .xlsx workbook is one)",
    b"PAR1": "a Parquet file",
    b"\xd0\xcf\x11\xe0": "an old workbook or another compound file",
    b"\x1f\x8b": "a gzip archive",
    b"%PDF": "a PDF",
    b"<!DOCTYPE": "a web page",
    b"<html": "a web page",
}
SHOWN_NAMES = 12


def read_cells(source: Source) -> pd.DataFrame:
    """All cells as text, one row a data row; the index is the line in the file (header 1)."""
    content = read_bytes(source)
    if source.path.suffix.lower() == ".parquet":
        return _parquet(source, content)
    for mark, what in SIGNATURES.items():
        if content.startswith(mark):
            raise DataError(f"{source.file}: is {what}, not the text its name says; export it as CSV in UTF-8")
    return _csv(source, _decode(source, content))


def read_bytes(source: Source) -> bytes:
    """The file's content; DataError for everything that is no readable file with something in it."""
    try:
        content = source.path.read_bytes()
    except FileNotFoundError:
        raise DataError(f"{source.file}: no such file; looked for {source.path}") from None
    except OSError as refused:
        denied = "may not be read (permission denied); allow reading it"
        what = denied if isinstance(refused, PermissionError) else f"cannot be read ({refused.strerror})"
        what = "is a folder; name a file in it" if source.path.is_dir() else what
        raise DataError(f"{source.file}: {what}") from None
    if not content.strip():
        raise DataError(f"{source.file}: is empty ({len(content)} bytes); expected a header row and data rows")
    return content


def _decode(source: Source, content: bytes) -> str:
    encoding = codecs.lookup(source.encoding).name
    wide = encoding.startswith(("utf-16", "utf-32"))
    if not wide and b"\x00" in content:
        at = content.index(b"\x00")
        raise DataError(f"{source.file}: byte {at} is NUL, so it is no plain text; export it as CSV in UTF-8")
    try:
        text = content.decode("utf-8-sig" if encoding == "utf-8" else encoding)
    except UnicodeDecodeError as wrong:
        place = "" if wide else f"row {content[: wrong.start].count(10) + 1}, "
        raise DataError(
            f"{source.file}: {place}byte {wrong.start} is no {source.encoding}; save the file as UTF-8 or declare its "
            'encoding, such as encoding = "latin-1"'
        ) from None
    return text.replace("\r\n", "\n").replace("\r", "\n")


def _csv(source: Source, text: str) -> pd.DataFrame:
    head = text.split("\n", 1)[0]
    separator = source.separator or _separator(head)
    names = _names(source, head, separator)
    _require_even_rows(source, text, separator, len(names))
    cells = pd.read_csv(
        io.StringIO(text), sep=separator, header=0, names=names, dtype=object, na_filter=False, skip_blank_lines=False
    )
    cells.index = pd.RangeIndex(2, len(cells) + 2)
    if (cells.iloc[:, 0] == "").any():
        cells = cells[(cells != "").any(axis=1)]
    if cells.empty:
        raise DataError(f"{source.file}: has a header row and no data row")
    return cells


def _separator(head: str) -> str:
    """The most frequent of comma, semicolon and tab outside quotation marks."""
    bare = re.sub(r'"[^"]*"', "", head)
    return max(",;\t", key=lambda mark: (bare.count(mark), mark == ","))


def _names(source: Source, head: str, separator: str) -> list[str]:
    names = [name.strip() for name in next(csv.reader([head], delimiter=separator), [])]
    if not any(names):
        raise DataError(f"{source.file}: row 1 is blank; the first row must name the columns")
    for name in names:
        if names.count(name) > 1:
            raise DataError(f"{source.file}: row 1: two columns are named {name!r}; each needs its own name")
    return names


def _require_even_rows(source: Source, text: str, separator: str, width: int) -> None:
    for number, cells in _widths(source, text, separator):
        if cells and cells != width:
            raise DataError(
                f"{source.file}: row {number} has {cells} cells and the header {width}; allowed is the same number"
            )


def _widths(source: Source, text: str, separator: str) -> Iterator[tuple[int, int]]:
    """Row number and number of cells of each row, 0 for a blank one."""
    lines = text.split("\n")
    if '"' not in text:
        yield from ((number, line.count(separator) + 1 if line else 0) for number, line in enumerate(lines, 1))
        return
    rows, first = csv.reader(lines, delimiter=separator, strict=True), 1
    try:
        for row in rows:
            yield first, len(row)
            first = rows.line_num + 1
    except csv.Error as wrong:
        raise DataError(
            f"{source.file}: row {first}: a quotation mark is not closed, or more follows it ({wrong}); allowed are "
            "quotation marks around a whole cell, doubled inside it"
        ) from None


def _parquet(source: Source, content: bytes) -> pd.DataFrame:
    try:
        import pyarrow as pa
        import pyarrow.parquet as pq
    except ImportError:
        raise ExtraError(f"{source.file}: Parquet needs pyarrow; install carrylab with its parquet extra") from None
    if not content.startswith(b"PAR1"):
        raise DataError(f"{source.file}: is no Parquet file, whatever its name says; name it .csv if it is text")
    try:
        table = pq.read_table(pa.BufferReader(content))
    except (pa.ArrowException, OSError) as wrong:
        raise DataError(f"{source.file}: is a damaged Parquet file ({_one_line(wrong)}); export it again") from None
    if not table.num_rows:
        raise DataError(f"{source.file}: has columns and no data row")
    cells = pd.DataFrame({name: _texts(source, table, at) for at, name in enumerate(table.column_names)}, dtype=object)
    cells.index = pd.RangeIndex(2, len(cells) + 2)
    return cells


def _texts(source: Source, table: object, at: int) -> object:
    """One Parquet column as text, empty for a null and for NaN."""
    import pyarrow as pa
    import pyarrow.compute as pc

    column = table.column(at)  # type: ignore[attr-defined]
    try:
        text = pc.fill_null(pc.cast(column, pa.string()), "")
    except pa.ArrowException:
        name = table.column_names[at]  # type: ignore[attr-defined]
        raise DataError(
            f"{source.file}: column {name!r} holds {column.type}; allowed are texts, numbers and dates"
        ) from None
    if pa.types.is_floating(column.type):
        text = pc.if_else(pc.equal(text, "nan"), "", text)
    return text.to_numpy(zero_copy_only=False)


def _one_line(wrong: BaseException) -> str:
    return str(wrong).split("\n", 1)[0]


def require_column(source: Source, names: Iterable[str], wanted: str) -> None:
    """DataError that shows the columns found and suggests the nearest where the wanted one is missing."""
    listed = list(names)
    if wanted in listed:
        return
    close = difflib.get_close_matches(wanted, listed, n=1)
    suggestion = f"did you mean {close[0]!r}? " if close else ""
    example = close[0] if close else "name_in_file"
    raise DataError(
        f"{source.file}: no column {wanted!r}; {suggestion}found: {shown(listed)}; map another name with "
        f'columns = {{ {example} = "{wanted}" }}'
    )


def shown(names: Iterable[str]) -> str:
    """Names for a message, the first dozen of them."""
    listed = list(names)
    more = f" and {len(listed) - SHOWN_NAMES} more" if len(listed) > SHOWN_NAMES else ""
    return ", ".join(listed[:SHOWN_NAMES]) + more
