"""A judgement, its ranking and the history as CSV, Parquet and JSON: the same bytes in the report and in an export.

Text that a spreadsheet would take for a formula is preceded by an apostrophe in CSV; Parquet and JSON keep it as is.
"""

from __future__ import annotations

import io
import json
from pathlib import Path

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq

FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r")


def csv_bytes(frame: pd.DataFrame) -> bytes:
    """UTF-8 with byte order mark (spreadsheets then read umlauts right), ISO times, lists joined by '; '."""
    out = _flat(frame)
    for name in out.columns:
        if out[name].dtype == object or isinstance(out[name].dtype, pd.StringDtype):
            out[name] = out[name].map(_harmless)
    text = out.to_csv(index=False, lineterminator="\n", date_format="%Y-%m-%dT%H:%M:%SZ", float_format="%.10g")
    return text.encode("utf-8-sig")


def parquet_bytes(frame: pd.DataFrame) -> bytes:
    """Parquet with the lists as lists."""
    buffer = io.BytesIO()
    pq.write_table(pa.Table.from_pandas(frame, preserve_index=False), buffer, compression="zstd")
    return buffer.getvalue()


def json_bytes(frame: pd.DataFrame) -> bytes:
    """A JSON list of rows; what does not apply is null."""
    plain = frame.copy()
    for name in plain.columns:
        if pd.api.types.is_datetime64_any_dtype(plain[name]):
            plain[name] = plain[name].dt.strftime("%Y-%m-%dT%H:%M:%SZ")
        plain[name] = plain[name].astype(object).where(plain[name].notna(), None)
    rows = [{key: _plain(value) for key, value in row.items()} for row in plain.to_dict("records")]
    return json.dumps(rows, ensure_ascii=False, allow_nan=False, separators=(",", ":"), indent=None).encode()


def write(folder: Path, tables: dict[str, pd.DataFrame]) -> list[Path]:
    """Write each table in the three formats; returns the files written."""
    folder.mkdir(parents=True, exist_ok=True)
    written = []
    for name, frame in tables.items():
        for ending, content in (
            ("csv", csv_bytes(frame)),
            ("parquet", parquet_bytes(frame)),
            ("json", json_bytes(frame)),
        ):
            path = folder / f"{name}.{ending}"
            path.write_bytes(content)
            written.append(path)
    return written


def _flat(frame: pd.DataFrame) -> pd.DataFrame:
    out = frame.copy()
    for name in out.columns:
        if out[name].dtype == object and out[name].map(_is_list).any():
            out[name] = out[name].map(lambda value: "; ".join(map(str, value)) if _is_list(value) else value)
    return out


def _is_list(value: object) -> bool:
    return isinstance(value, list | tuple | np.ndarray)


def _harmless(value: object) -> object:
    return "'" + value if isinstance(value, str) and value.startswith(FORMULA_STARTS) else value


def _plain(value: object) -> object:
    if hasattr(value, "tolist"):  # numpy scalars and arrays
        return value.tolist()
    return value
