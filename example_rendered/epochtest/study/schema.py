"""JSON Schema of the protocol files, for editors that check TOML while you type."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from pydantic import TypeAdapter

from epochtest.study.claims import Claim
from epochtest.study.results import ClaimResult
from epochtest.study.settings import Sources, Study
from epochtest.study.sky_results import ForcingResult, RecurrenceResult

SCHEMAS: dict[str, TypeAdapter[Any]] = {
    "study.schema.json": TypeAdapter(Study),
    "claim.schema.json": TypeAdapter(Claim),
    "sources.schema.json": TypeAdapter(Sources),
    "result.schema.json": TypeAdapter(ClaimResult | RecurrenceResult | ForcingResult),
}


def schema_text(name: str) -> str:
    """The JSON Schema file ``name`` as text."""
    schema = SCHEMAS[name].json_schema()
    schema["$schema"] = "https://json-schema.org/draft/2020-12/schema"
    return json.dumps(schema, indent=2, ensure_ascii=False) + "\n"


def write_schemas(folder: Path) -> list[Path]:
    """Write every schema into ``folder``; returns the paths."""
    folder.mkdir(parents=True, exist_ok=True)
    paths = []
    for name in SCHEMAS:
        path = folder / name
        path.write_text(schema_text(name), encoding="utf-8")
        paths.append(path)
    return paths
