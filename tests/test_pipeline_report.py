"""The report page: one file that opens without a network, every chart with words.

Authorities: Content Security Policy level 3 (W3C) for what a page may load; WAI-ARIA 1.2 for
the role and label of a picture; HTML for unique ids.
"""

from __future__ import annotations

import re
from html.parser import HTMLParser
from pathlib import Path

import nbformat
import pytest
from epochtest.errors import EpochtestError
from epochtest.pipeline.html import write_report
from epochtest.study.results import CAUTION

from tests.studies import REPOSITORY

REPORT = REPOSITORY / "example_rendered" / "runs" / "report.html"
VOID = {"meta", "br", "hr", "img", "input", "link"}


class Page(HTMLParser):
    """What a page contains: elements with attributes, ids, text."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.elements: list[tuple[str, dict[str, str | None]]] = []
        self.open: list[str] = []
        self.text = ""
        self.feed(text)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        """Note an element."""
        self.elements.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag: str) -> None:
        """Close an element; the page must be well nested."""
        assert self.open.pop() == tag, tag

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        """Note an empty element."""
        self.elements.append((tag, dict(attrs)))

    def handle_data(self, data: str) -> None:
        """Collect text."""
        self.text += data


@pytest.fixture(scope="module")
def page() -> Page:
    """The committed report of the demo, which other tests prove current."""
    return Page(REPORT.read_text(encoding="utf-8"))


def test_page_loads_nothing(page: Page) -> None:
    """No script, no link element, no address outside the page in any attribute or style."""
    tags = {tag for tag, _ in page.elements}
    assert not tags & {"script", "link", "iframe", "object", "embed", "img", "base"}
    for tag, attributes in page.elements:
        for name, value in attributes.items():
            if name in ("href", "src", "xlink:href", "srcset", "action", "data"):
                assert (value or "").startswith("#"), (tag, name, value)
    text = REPORT.read_text(encoding="utf-8")
    addresses = set(re.findall(r"https?://[^\s\"'<)]+", text))
    assert addresses <= {"http://www.w3.org/2000/svg"}  # the name of a namespace, never fetched
    [policy] = [a["content"] for t, a in page.elements if a.get("http-equiv")]
    assert policy == "default-src 'none'; style-src 'unsafe-inline'; img-src data:"


def test_every_chart_has_words(page: Page) -> None:
    """Each SVG stands in an element with role img and a label, and has a caption."""
    text = REPORT.read_text(encoding="utf-8")
    charts = [a for _, a in page.elements if a.get("role") == "img"]
    svgs = [1 for tag, _ in page.elements if tag == "svg"]
    assert len(charts) == len(svgs) == text.count("<figcaption>") >= 4 * 3 + 4
    assert all(len(a.get("aria-label") or "") > 40 for a in charts)


def test_ids_are_unique_and_links_lead_somewhere(page: Page) -> None:
    """No two elements share an id (clip paths of charts would mix), and every link has a target."""
    ids = [a["id"] for _, a in page.elements if a.get("id")]
    assert len(ids) == len(set(ids))
    targets = {a["href"] for t, a in page.elements if t == "a" and a.get("href")}
    assert targets
    assert {target.removeprefix("#") for target in targets if target} <= set(ids)


def test_findings_come_first_code_is_folded_caution_is_there(page: Page) -> None:
    """The findings table precedes every claim; code sits in closed details; the caution is said."""
    text = REPORT.read_text(encoding="utf-8")
    assert text.index("<table") < text.index('id="claim-')
    assert text.index("excess") < text.index('id="claim-')
    assert CAUTION in page.text
    details = [a for t, a in page.elements if t == "details"]
    assert details
    assert all("open" not in a for a in details)
    for section in ("findings", "claims", "nulls", "catalog", "epochs", "provenance", "cautions"):
        assert f'id="{section}"' in text


def test_page_has_title_language_and_no_warning_output(page: Page) -> None:
    """The title is the study's name, the language is stated, no stderr output is on the page."""
    assert ("html", {"lang": "en"}) in page.elements
    text = REPORT.read_text(encoding="utf-8")
    assert "<title>Tessaline Arc</title>" in text
    assert 'class="stderr"' not in text


def test_a_page_that_would_load_something_is_refused(tmp_path: Path) -> None:
    """A notebook whose output brings a script or a remote picture makes no report."""
    for markup in ("<script>1</script>", '<img src="https://example.org/x.png">'):
        output = nbformat.v4.new_output("display_data", {"text/html": markup})
        cell = nbformat.v4.new_code_cell("1", outputs=[output])
        nbformat.write(nbformat.v4.new_notebook(cells=[cell]), tmp_path / "n.ipynb")
        with pytest.raises(EpochtestError, match="without a network"):
            write_report(tmp_path / "n.ipynb", tmp_path / "report.html")
        assert not (tmp_path / "report.html").exists()
