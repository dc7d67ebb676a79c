"""Opening data files: what stands in a file as text cells, or one clear line why it cannot be read."""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping, Sequence

import pandas as pd

from carrylab.errors import DataError, ExtraError
from carrylab.options import Source
from carrylab.schema import nearest

SIGNATURES: Mapping[bytes, str] = {
    b"PK\x03\x04": "a zip archive (an .xlsx workbook is one)",
    b"PAR1": "a Parquet file",
    b"\xd0\xcf\x11\xe0": "an old Excel workbook",
    b"\x1f\x8b": "a gzip archive",
    b"%PDF": "a PDF",
}


def read_bytes(source: Source) -> bytes:
    """The file's content; DataError for everything that is no readable file with something in it."""
    try:
        content = source.path.read_bytes()
    except FileNotFoundError:
        raise DataError(f"{source.file}: no such file; looked for {source.path}") from None
    except (IsADirectoryError, PermissionError):
        what = "is a folder; name a file" if source.path.is_dir() else "may not be read (permission denied)"
        raise DataError(f"{source.file}: {what}") from None
    if not content.strip():
        raise DataError(f"{source.file}: is empty ({len(content)} bytes); expected a header row and data")
    return content


def read_cells(source: Source) -> pd.DataFrame:
    """All cells as text, one row a data row; the index is the line in the file (header 1)."""
    content = read_bytes(source)
    if source.path.suffix.lower() == ".parquet":
        return _parquet(source, content)
    for mark, what in SIGNATURES.items():
        if content.startswith(mark):
            raise DataError(f"{source.file}: is {what}, not the text its name says; export it as CSV (UTF-8)")
    if b"\x00" in content[:65536]:
        raise DataError(f"{source.file}: holds NUL bytes, so it is no plain text; export it as CSV (UTF-8)")
    return _csv(source, _decode(source, content))


def _decode(source: Source, content: bytes) -> str:
    encoding = "utf-8-sig" if source.encoding.lower().replace("_", "-") in ("utf-8", "utf8") else source.encoding
    try:
        return content.decode(encoding)
    except UnicodeDecodeError as wrong:
        line = content[: wrong.start].count(b"\n") + 1
        raise DataError(
            f"{source.file}: row {line}, byte {wrong.start} is no {source.encoding}; save the file as UTF-8 or "
            'declare its encoding, such as encoding = "latin-1"'
        ) from None


def _csv(source: Source, text: str) -> pd.DataFrame:
    separator = source.separator or _separator(text)
    header = next(csv.reader(io.StringIO(text), delimiter=separator))
    names = [name.strip() for name in header]
    twice = sorted({name for name in names if names.count(name) > 1})
    if twice:
        raise DataError(f"{source.file}: row 1, two columns are named {twice[0]!r}; each needs its own name")
    _require_even_rows(source, text, separator, len(names))
    cells = pd.read_csv(
        io.StringIO(text), sep=separator, header=0, names=names, dtype=str, na_filter=False, skip_blank_lines=False
    )
    cells.index = pd.RangeIndex(2, len(cells) + 2)
    cells = cells[(cells != "").any(axis=1)] if (cells.iloc[:, 0] == "").any() else cells
    if cells.empty:
        raise DataError(f"{source.file}: has a header and no data row")
    return cells


def _require_even_rows(source: Source, text: str, separator: str, width: int) -> None:
    lines = text.count("\n") + (not text.endswith("\n"))
    if '"' not in text and text.count(separator) == lines * (width - 1):
        return
    for number, row in enumerate(csv.reader(io.StringIO(text), delimiter=separator), 1):
        if row and len(row) != width:
            raise DataError(
                f"{source.file}: row {number} has {len(row)} cells and the header {width}; every row needs as many as "
                "the header"
            )


def _separator(text: str) -> str:
    head = text.split("\n", 1)[0]
    return max(",;\t", key=lambda mark: (head.count(mark), mark == ","))


def _parquet(source: Source, content: bytes) -> pd.DataFrame:
    try:
        import pyarrow.parquet as pq
    except ImportError:
        raise ExtraError(f"{source.file}: Parquet needs pyarrow; install carrylab with its parquet extra") from None
    if not content.startswith(b"PAR1"):
        raise DataError(f"{source.file}: is no Parquet file, whatever its name says")
    frame = pq.read_table(io.BytesIO(content)).to_pandas()
    cells = pd.DataFrame({str(name): [_as_text(value) for value in frame[name]] for name in frame.columns})
    cells.index = pd.RangeIndex(2, len(cells) + 2)
    if cells.empty:
        raise DataError(f"{source.file}: has no data row")
    return cells


def _as_text(value: object) -> str:
    if value is None or value != value:
        return ""
    isoformat = getattr(value, "isoformat", None)
    return isoformat()[:10] if isoformat else str(value)


def require_column(source: Source, names: Sequence[str], wanted: str) -> None:
    """DataError that names the nearest column where one is missing."""
    if wanted not in names:
        raise DataError(
            f"{source.file}: no column {wanted!r}{nearest(wanted, names)} Found: {', '.join(names)}; map another "
            f'name with columns = {{ name_in_file = "{wanted}" }}'
        )


