"""A table of a notebook or report as HTML that a screen reader can walk through."""

from __future__ import annotations

from dataclasses import dataclass
from html import escape

import pandas as pd

NUMERIC = "numeric columns"


@dataclass(frozen=True, repr=False)
class HtmlTable:
    """A frame with a caption; notebooks and the report show it through `_repr_html_`.

    Columns of numbers are set flush right: those of a numeric dtype and those that the
    maker of the frame listed in ``frame.attrs[NUMERIC]``.
    """

    frame: pd.DataFrame
    caption: str

    def __repr__(self) -> str:
        return f"{self.caption}\n{self.frame.to_string(index=False)}"

    def _repr_html_(self) -> str:
        listed = set(self.frame.attrs.get(NUMERIC, ()))
        right = [
            name in listed or pd.api.types.is_numeric_dtype(self.frame[name])
            for name in self.frame.columns
        ]
        head = "".join(
            f'<th scope="col"{_align(flush)}>{escape(str(name))}</th>'
            for name, flush in zip(self.frame.columns, right, strict=True)
        )
        body = "".join(
            "<tr>"
            + "".join(_cell(n, v, f) for n, (v, f) in enumerate(zip(row, right, strict=True)))
            + "</tr>"
            for row in self.frame.itertuples(index=False, name=None)
        )
        if self.frame.empty:
            body = f'<tr><td colspan="{max(1, len(right))}">none</td></tr>'
        caption = escape(self.caption)
        return (
            f'<div role="region" tabindex="0" aria-label="{caption}" style="overflow-x:auto">'
            f'<table><caption style="text-align:left">{caption}</caption>'
            f"<thead><tr>{head}</tr></thead><tbody>{body}</tbody></table></div>"
        )


def html(frame: pd.DataFrame, caption: str) -> HtmlTable:
    """``frame`` with a caption, to be shown in a notebook or the report."""
    return HtmlTable(frame, caption)


def numeric(frame: pd.DataFrame, *columns: str) -> pd.DataFrame:
    """``frame`` with ``columns`` marked as numbers already written out as text."""
    frame.attrs[NUMERIC] = columns
    return frame


def _align(right: bool) -> str:
    side = "right" if right else "left"
    extra = ";font-variant-numeric:tabular-nums" if right else ""
    return f' style="text-align:{side}{extra}"'


def _cell(position: int, value: object, right: bool) -> str:
    text = escape("–" if value is None or value is pd.NA else str(value))
    if position == 0:
        return f'<th scope="row"{_align(right)}>{text}</th>'
    return f"<td{_align(right)}>{text}</td>"
