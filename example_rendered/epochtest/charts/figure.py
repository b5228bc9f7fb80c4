"""A chart as it stands in a report: picture, title, how to read it, and words for the blind."""

from __future__ import annotations

import hashlib
import re
from dataclasses import dataclass
from html import escape
from pathlib import Path
from typing import Any

import altair
import vl_convert

from epochtest.charts import style
from epochtest.files import write_whole

_TAG = re.compile(r"<[^>]*>")
_LONG_DECIMAL = re.compile(r"-?\d+\.\d{3,}(?:e-?\d+)?")
_UNUSED = re.compile(
    r' (?:xmlns:xlink|aria-[a-z]+|role|class|pointer-events|version)="[^"]*"| opacity="1"'
)
_EMPTY_PATH = re.compile(r'<path d="(?:M0,0h0v0h0Z)?"(?: display="none")?/>')
_ID = re.compile(r'\bid="([^"]+)"')
_DARK_PAGE, _LIGHT_PAGE = ("#121212", "#e8e8e8"), ("#ffffff", "#1a1a1a")


@dataclass(frozen=True, repr=False)
class Figure:
    """One chart; notebooks and the report show it through `_repr_html_`.

    ``svg`` has no script, no link and no fixed ink, so that it works without a network and
    on light and dark pages. The same input gives the same bytes.
    """

    svg: str
    title: str
    caption: str
    alt: str

    @classmethod
    def of(cls, chart: Any, *, kind: str, title: str, caption: str, alt: str) -> Figure:
        """Draw an Altair ``chart``; ``kind`` opens the names of the SVG's inner ids."""
        raw = vl_convert.vegalite_to_svg(chart.to_dict(), allowed_base_urls=[])
        return cls(svg=_named(_tidy(raw), kind), title=title, caption=caption, alt=alt)

    @classmethod
    def saying(cls, message: str, *, kind: str, title: str) -> Figure:
        """A figure for when there is nothing to draw: one plain sentence in its place."""
        chart = style.finished(
            [style.text_at(altair.XValue(0), altair.YValue(20), message, size=15)],
            height_px=60,
        )
        return cls.of(chart, kind=kind, title=title, caption=message, alt=f"{title}. {message}")

    def __repr__(self) -> str:
        return f"Figure({self.title!r})"

    def _repr_html_(self) -> str:
        return (
            f'<figure><div role="img" aria-label="{escape(self.alt)}">{self.svg}</div>'
            f"<figcaption><strong>{escape(self.title)}.</strong> {escape(self.caption)}"
            "</figcaption></figure>"
        )

    def save_svg(self, path: str | Path) -> Path:
        """Write the SVG with its title and description inside; returns the path."""
        words = f"<title>{escape(self.title)}</title><desc>{escape(self.alt)}</desc>"
        head, tail = self.svg.split(">", 1)
        write_whole(Path(path), f"{head}>{words}{tail}".encode())
        return Path(path)

    def save_png(self, path: str | Path, *, scale: float = 2.0, dark: bool = False) -> Path:
        """Write a PNG on a white (or near-black) page, for looking at; returns the path."""
        page, ink = _DARK_PAGE if dark else _LIGHT_PAGE
        svg = re.sub(r' style="[^"]*"', "", self.svg, count=1).replace("currentColor", ink)
        head, tail = svg.split(">", 1)
        sheet = f'<rect width="100%" height="100%" fill="{page}"/>'
        write_whole(Path(path), vl_convert.svg_to_png(f"{head}>{sheet}{tail}", scale=scale))
        return Path(path)


def _tidy(svg: str) -> str:
    """Without attributes that a picture does not need, and coordinates to 0.01 pixels."""

    def shorter(tag: re.Match[str]) -> str:
        text = _UNUSED.sub("", tag.group())
        return _LONG_DECIMAL.sub(lambda number: f"{float(number.group()):.2f}", text)

    return _EMPTY_PATH.sub("", _TAG.sub(shorter, svg)).replace(
        "<svg ", '<svg style="max-width:100%;height:auto" ', 1
    )


def _named(svg: str, kind: str) -> str:
    """With inner ids that no other chart of the page has and no earlier chart influenced."""
    ids = list(dict.fromkeys(_ID.findall(svg)))
    for number, old in enumerate(ids):
        svg = _rename(svg, old, f"id-{number}")
    mark = hashlib.sha256(f"{kind}\n{svg}".encode()).hexdigest()[:10]
    for number in range(len(ids)):
        svg = _rename(svg, f"id-{number}", f"{kind}-{mark}-{number}")
    return svg


def _rename(svg: str, old: str, new: str) -> str:
    for form in ('id="{}"', "url(#{})", 'href="#{}"'):
        svg = svg.replace(form.format(old), form.format(new))
    return svg
