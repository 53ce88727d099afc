"""A file or DataFrame -> a raw table of texts, with the row numbers the user counts.

Nothing is interpreted here: `001` stays `001`, `NA` stays `NA`, an empty cell is ''.
"""

from __future__ import annotations

import csv
import io
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from energy.problems import Problem, StructuralProblems

if TYPE_CHECKING:
    import pandas as pd

LARGEST_FILE = 400_000_000
_BINARY = (b"\x89PNG", b"%PDF", b"\xff\xd8\xff", b"GIF8", b"PK\x03\x04", b"\xd0\xcf\x11\xe0", b"PAR1")


@dataclass
class RawTable:
    """Headers and (n, k) object array of str. rows: (n,) row numbers as the user counts. typed: numbers came as numbers."""

    headers: list[str]
    cells: np.ndarray
    rows: np.ndarray
    where: str
    separator: str = ","
    typed: bool = False


def read_table(source: Any, name: str | None = None) -> RawTable:
    """Read CSV, XLSX, Parquet (path, or bytes with a name) or a DataFrame. Raises StructuralProblems."""
    if hasattr(source, "columns") and hasattr(source, "iloc"):
        return _from_frame(source, name or "table")
    if isinstance(source, (bytes, bytearray)):
        return _from_bytes(bytes(source), name or "upload.csv")
    path = Path(source)
    if not path.is_file():
        raise _stop(
            path.name, "there is no such file." if not path.exists() else "it is not a file.", "Check the path."
        )
    if path.stat().st_size > LARGEST_FILE:
        raise _stop(path.name, "it is larger than 400 MB.", "Split it, or give Parquet in parts.")
    return _from_bytes(path.read_bytes(), path.name)


def _stop(where: str, what: str, cure: str) -> StructuralProblems:
    return StructuralProblems([Problem(what=what, cure=cure, where=where, severity="structural")])


def _from_bytes(data: bytes, name: str) -> RawTable:
    ending = Path(name).suffix.lower()
    if not data.strip():
        raise _stop(name, "the file is empty.", "Give a table with a header row and one row per sample.")
    if ending in (".xlsx", ".xls", ".ods"):
        return _from_workbook(data, name)
    if ending in (".parquet", ".pq"):
        return _from_parquet(data, name)
    if data.startswith(_BINARY) or (b"\x00" in data[:4000] and not data.startswith((b"\xff\xfe", b"\xfe\xff"))):
        raise _stop(name, "this is not a text table.", "Give CSV, XLSX or Parquet with the matching file ending.")
    return _from_csv(_decode(data), name)


def _decode(data: bytes) -> str:
    if data.startswith((b"\xff\xfe", b"\xfe\xff")):
        return data.decode("utf-16", errors="replace")
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError:
        return data.decode("cp1252", errors="replace")


def _from_csv(text: str, name: str) -> RawTable:
    lines = text.splitlines()
    skipped = next((i for i, line in enumerate(lines) if line.strip() and not line.startswith("#")), None)
    if skipped is None:
        raise _stop(name, "there is no header row.", "Give a header row and one row per sample.")
    separator = _separator(lines[skipped])
    body = "\n".join(lines[skipped:])
    parsed = list(csv.reader(io.StringIO(body), delimiter=separator))
    return _assemble(parsed, name, first_row=skipped + 1, separator=separator)


def _separator(header: str) -> str:
    """The separator that splits the header most, outside quotes and unit brackets."""
    counts = {}
    for separator in (";", "\t", ","):
        counts[separator] = len(next(csv.reader([header], delimiter=separator)))
    return max(counts, key=lambda s: counts[s])


def _assemble(
    parsed: list[list[str]], name: str, first_row: int, separator: str = ",", typed: bool = False
) -> RawTable:
    headers = [h.strip() for h in parsed[0]]
    while headers and not headers[-1]:
        headers.pop()
    width = len(headers)
    problems, kept, rows = [], [], []
    for i, line in enumerate(parsed[1:], start=first_row + 1):
        if not any(cell.strip() for cell in line):
            continue
        extra = [c for c in line[width:] if c.strip()]
        if extra:
            problems.append(Problem(
                what=f"the row has {len(line)} cells, the header {width}.", where=name, row=i, severity="structural",
                cure="A decimal comma in a comma-separated file? Use semicolons, or quote the cell."))  # fmt: skip
        kept.append([c.strip() for c in line[:width]] + [""] * (width - len(line)))
        rows.append(i)
    for k, header in enumerate(headers):
        if not header and any(line[k] for line in kept):
            problems.append(Problem(what=f"column {k + 1} has no header.", where=name, row=first_row,
                                    cure="Give it a name and a unit.", severity="structural"))  # fmt: skip
    if not kept:
        problems.append(Problem(what="there is a header but no row.", cure="Give one row per sample.", where=name,
                                severity="structural"))  # fmt: skip
    if problems:
        raise StructuralProblems(problems)
    cells = np.array(kept, dtype=object).reshape(len(kept), width)
    return RawTable(headers, cells, np.array(rows), name, separator, typed)


def _from_workbook(data: bytes, name: str) -> RawTable:
    import python_calamine

    try:
        book = python_calamine.load_workbook(io.BytesIO(data))
        sheets = {s: book.get_sheet_by_name(s).to_python(skip_empty_area=False) for s in book.sheet_names}
    except Exception:  # the reader raises its own family of errors for anything that is no workbook
        raise _stop(name, "this is not a workbook that can be read.", "Save it as .xlsx or .csv.") from None
    chosen = next((s for s, rows in sheets.items() if any("sample_id" in map(_text, r) for r in rows[:5])), None)
    chosen = chosen or next((s for s, rows in sheets.items() if rows), None)
    if chosen is None:
        raise _stop(name, "the workbook is empty.", "Give a header row and one row per sample.")
    rows = [[_text(c) for c in row] for row in sheets[chosen]]
    first = next((i for i, r in enumerate(rows) if any(r) and not r[0].startswith("#")), None)
    if first is None:
        raise _stop(name, "the sheet is empty.", "Give a header row and one row per sample.")
    return _assemble(rows[first:], f"{name}, sheet {chosen}", first_row=first + 1, typed=True)


def _text(value: Any) -> str:
    if value is None:
        return ""
    if isinstance(value, bool):
        return str(value)
    if isinstance(value, (float, np.floating)):
        value = float(value)
        if np.isnan(value):
            return ""
        return str(int(value)) if value == int(value) and abs(value) < 1e15 else repr(float(value))
    return str(value).strip()


def _from_parquet(data: bytes, name: str) -> RawTable:
    import pandas as pd

    try:
        frame = pd.read_parquet(io.BytesIO(data))
    except Exception:  # pyarrow's family of errors
        raise _stop(name, "this is not a Parquet file that can be read.", "Write it again, or give CSV.") from None
    return _from_frame(frame, name)


def _from_frame(frame: pd.DataFrame, name: str) -> RawTable:
    if not len(frame.columns) or not len(frame):
        raise _stop(name, "the table is empty.", "Give one row per sample.")
    columns = []
    for k in range(len(frame.columns)):
        values = frame.iloc[:, k]
        if values.dtype.kind in "fiu":
            numbers = values.to_numpy(dtype=float)
            texts = numbers.astype(str).astype(object)
            whole = np.isfinite(numbers) & (numbers == np.round(numbers)) & (np.abs(numbers) < 1e15)
            texts[whole] = numbers[whole].astype(np.int64).astype(str)
            texts[np.isnan(numbers)] = ""
            columns.append(texts)
        else:
            missing = values.isna().to_numpy()
            texts = np.array([_text(v) for v in values.to_numpy(dtype=object)], dtype=object)
            texts[missing] = ""
            columns.append(texts)
    cells = np.column_stack(columns).astype(object)
    return RawTable([str(c).strip() for c in frame.columns], cells, np.arange(2, len(frame) + 2), name, typed=True)
