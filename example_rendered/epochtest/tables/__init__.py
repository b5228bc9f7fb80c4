"""Report tables from result objects: frames of text, HTML with captions, terminal tables."""

from epochtest.tables.claim import test_table
from epochtest.tables.findings import (
    findings_numbers,
    findings_table,
    findings_text,
    nulls_table,
)
from epochtest.tables.html import HtmlTable, html
from epochtest.tables.inputs import (
    base_rates_table,
    epochs_table,
    files_table,
    provenance_table,
    quarantine_table,
)
from epochtest.tables.protocol import decided_before

__all__ = [
    "HtmlTable",
    "base_rates_table",
    "decided_before",
    "epochs_table",
    "files_table",
    "findings_numbers",
    "findings_table",
    "findings_text",
    "html",
    "nulls_table",
    "provenance_table",
    "quarantine_table",
    "test_table",
]
