"""The one table of earthquakes: its columns, its empty form, and its Parquet file."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq

from epochtest.errors import CatalogError, MissingArtifactError
from epochtest.files import write_whole

COLUMNS: dict[str, tuple[str, str]] = {
    "event_id": ("str", "string"),
    "time_utc": ("datetime64[us]", "timestamp[us]"),
    "latitude_deg": ("float64", "double"),
    "longitude_deg": ("float64", "double"),
    "depth_km": ("float64", "double"),
    "magnitude": ("float64", "double"),
    "magnitude_type": ("str", "string"),
    "event_type": ("str", "string"),
    "strike_deg": ("float64", "double"),
    "dip_deg": ("float64", "double"),
    "rake_deg": ("float64", "double"),
    "day_only": ("bool", "bool"),
    "source_file": ("str", "string"),
    "source_line": ("int64", "int64"),
}
"""Column name -> (pandas type, Arrow type), in order.

``time_utc`` is UTC without a zone; ``longitude_deg`` lies in -180..180; ``depth_km`` is
positive down and NaN where missing; ``day_only`` marks rows dated to the day, which stand at
12:00 UTC; strike, dip and rake are those of one nodal plane, all three or NaN;
``source_line`` is the 1-based line in ``source_file`` where the row begins.
"""

_ARROW = {
    "string": pa.string(), "timestamp[us]": pa.timestamp("us"), "double": pa.float64(),
    "bool": pa.bool_(), "int64": pa.int64(),
}  # fmt: skip


def arrow_schema() -> pa.Schema:
    """The table's Arrow schema, without any metadata."""
    return pa.schema([(name, _ARROW[arrow]) for name, (_, arrow) in COLUMNS.items()])


def empty_frame() -> pd.DataFrame:
    """A table with every column, its type, and no row."""
    return pd.DataFrame({name: pd.Series(dtype=kind) for name, (kind, _) in COLUMNS.items()})


def as_schema(frame: pd.DataFrame) -> pd.DataFrame:
    """``frame`` with exactly the schema's columns, order and types, and a fresh index.

    Raises CatalogError naming the columns that are missing.
    """
    missing = [name for name in COLUMNS if name not in frame.columns]
    if missing:
        raise CatalogError(
            f"The table of earthquakes lacks the column(s) {', '.join(missing)}; "
            "make it again from the catalog files.",
            missing=missing,
        )
    kinds = {name: kind for name, (kind, _) in COLUMNS.items()}
    return frame[list(COLUMNS)].reset_index(drop=True).astype(kinds)


def write_parquet(frame: pd.DataFrame, path: Path) -> None:
    """Write the table; the same rows give the same bytes under the same pyarrow version.

    No time of writing, path, pandas note or index goes into the file; written in one step.
    """
    table = pa.Table.from_pandas(as_schema(frame), schema=arrow_schema(), preserve_index=False)
    buffer = pa.BufferOutputStream()
    pq.write_table(table, buffer, compression="zstd", store_schema=False, row_group_size=1 << 18)
    write_whole(path, buffer.getvalue().to_pybytes())


def read_parquet(path: Path) -> pd.DataFrame:
    """Read a table written by `write_parquet`.

    Raises MissingArtifactError if there is no such file, CatalogError if it holds another table.
    """
    if not path.is_file():
        raise MissingArtifactError(
            f"{path.name} is not there; run the catalog step first.", file=path.name
        )
    try:
        table = pq.read_table(path)
    except pa.ArrowInvalid as error:
        raise CatalogError(
            f"{path.name} is no Parquet file; delete it and run the catalog step again.",
            file=path.name,
        ) from error
    return as_schema(table.to_pandas())
