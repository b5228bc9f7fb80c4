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
    nearby_table,
    provenance_table,
    quarantine_table,
)
from epochtest.tables.protocol import decided_before
from epochtest.tables.sky import (
    loads_table,
    occurrences_table,
    pulls_table,
    recurrence_numbers,
    sky_findings_table,
)

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
    "loads_table",
    "nearby_table",
    "nulls_table",
    "occurrences_table",
    "provenance_table",
    "pulls_table",
    "quarantine_table",
    "recurrence_numbers",
    "sky_findings_table",
    "test_table",
]
