"""Text fields as Arrow arrays: trimming, whole numbers, decimal numbers."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray

_DECIMAL = r"^[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d{1,3})?$"
_ABSENT = ["", "nan", "null", "none", "na", "n/a", "-", "--"]
"""Spellings of "no value" (common practice); numbers such as -999 are not taken for absence."""


def text_array(column: pd.Series) -> pa.Array:
    """A text column of a frame as one Arrow string array, missing values as ""."""
    array = pa.array(column, type=pa.large_string(), from_pandas=True)
    if isinstance(array, pa.ChunkedArray):
        array = array.combine_chunks()
    return pc.fill_null(array, "")


def trimmed(texts: pa.Array) -> pa.Array:
    """The texts without white space at either end."""
    return pc.utf8_trim_whitespace(texts)


def absent(texts: pa.Array) -> NDArray[np.bool_]:
    """Mask (n,) of texts that stand for "no value"."""
    return np.asarray(pc.is_in(pc.utf8_lower(trimmed(texts)), value_set=pa.array(_ABSENT)))


def integers(digits: pa.Array) -> NDArray[np.int64]:
    """Whole numbers (n,) from texts of digits only; an empty or missing text gives 0."""
    filled = pc.fill_null(digits, "0")
    return np.array(pc.cast(pc.if_else(pc.equal(filled, ""), "0", filled), pa.int64()))


def decimals(texts: pa.Array) -> NDArray[np.float64]:
    """Decimal numbers (n,) with a point; NaN for anything else, infinities included."""
    plain = trimmed(texts)
    numeric = pc.match_substring_regex(plain, _DECIMAL)
    clean = pc.if_else(numeric, plain, pa.scalar(None, plain.type))
    clean = pc.utf8_ltrim(clean, "+")
    return np.array(pc.fill_null(pc.cast(clean, pa.float64()), np.nan), dtype=float)
