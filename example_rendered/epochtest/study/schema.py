"""JSON Schema of the protocol files, for editors that check TOML while you type."""

from __future__ import annotations

import json
from pathlib import Path

from pydantic import BaseModel

from epochtest.study.claims import TimingClaim
from epochtest.study.results import ClaimResult
from epochtest.study.settings import Sources, Study

SCHEMAS: dict[str, type[BaseModel]] = {
    "study.schema.json": Study,
    "claim.schema.json": TimingClaim,
    "sources.schema.json": Sources,
    "result.schema.json": ClaimResult,
}


def schema_text(name: str) -> str:
    """The JSON Schema file ``name`` as text."""
    schema = SCHEMAS[name].model_json_schema()
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
