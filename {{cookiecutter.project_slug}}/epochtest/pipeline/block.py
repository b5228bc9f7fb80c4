"""A piece of a page: HTML for the report, words for a terminal."""

from __future__ import annotations

from dataclasses import dataclass
from html import escape
from typing import Protocol

from epochtest.study.claims import Asserted


class Shown(Protocol):
    """Anything that can put itself on a page."""

    def _repr_html_(self) -> str: ...


@dataclass(frozen=True, repr=False)
class Block:
    """HTML with its plain words; notebooks and the report show it through `_repr_html_`."""

    markup: str
    words: str = ""

    def __repr__(self) -> str:
        return self.words

    def _repr_html_(self) -> str:
        return self.markup


def heading(level: int, text: str, anchor: str = "") -> Block:
    """A heading, with the name that links point to."""
    mark = f' id="{escape(anchor)}"' if anchor else ""
    return Block(f"<h{level}{mark}>{escape(text)}</h{level}>", text)


def link(anchor: str, text: str) -> str:
    """Markup of a link to a place on the same page."""
    return f'<a href="#{escape(anchor)}">{escape(text)}</a>'


def paragraph(text: str, look: str = "") -> Block:
    """A paragraph; ``look`` is a class of the page's style sheet."""
    mark = f' class="{look}"' if look else ""
    return Block(f"<p{mark}>{escape(text)}</p>", text)


def quotation(text: str) -> Block:
    """Somebody's words."""
    return Block(f"<blockquote><p>{escape(text)}</p></blockquote>", text)


def opening(claim: Asserted) -> Block:
    """The head of a claim's section: title with its anchor, statement, who asserts it."""
    pieces = [heading(3, claim.title, f"claim-{claim.id}"), quotation(claim.statement)]
    if claim.asserted_by:
        pieces.append(paragraph(f"Asserted by: {claim.asserted_by}"))
    return stacked(*pieces)


def stacked(*pieces: Shown) -> Block:
    """Pieces one below the other."""
    return Block(
        "\n".join(piece._repr_html_() for piece in pieces), "\n".join(repr(p) for p in pieces)
    )
