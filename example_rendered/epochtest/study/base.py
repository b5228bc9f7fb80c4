"""The strict base model and the sentences made of its faults."""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from typing import Any, get_args

from pydantic import BaseModel, ConfigDict, ValidationError


class Strict(BaseModel):
    """Unknown keys are errors; instances are frozen, so a model is safe to hash and share."""

    model_config = ConfigDict(
        extra="forbid", frozen=True, str_strip_whitespace=True, allow_inf_nan=False
    )


def nearest(word: str, known: Iterable[str]) -> str | None:
    """The known word closest in spelling to ``word``, or None if none is near."""
    candidates = list(known)
    lowered = {candidate.lower(): candidate for candidate in candidates}
    found = difflib.get_close_matches(word.lower(), lowered, n=1, cutoff=0.5)
    return lowered[found[0]] if found else None


def _models_at(model: type[BaseModel], path: tuple[Any, ...]) -> list[type[BaseModel]]:
    """Every model class that may stand at ``path`` inside ``model``."""
    here = [model]
    for step in path:
        below: list[type[BaseModel]] = []
        for candidate in here:
            field = candidate.model_fields.get(step) if isinstance(step, str) else None
            if field is not None:
                below.extend(_models_in(field.annotation))
        here = below or here
    return here


def _models_in(annotation: Any) -> list[type[BaseModel]]:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return [annotation]
    return [model for argument in get_args(annotation) for model in _models_in(argument)]


def _sentence(model: type[BaseModel], fault: Any) -> str:
    location = tuple(fault["loc"])
    tags = {_tag(m) for m in _models_at(model, location[:-1]) if m.model_fields.get("kind")}
    key = ".".join(str(step) for step in location if step not in tags)
    if fault["type"] == "extra_forbidden":
        parents = _models_at(model, location[:-1])
        tagged = [m for m in parents if m.model_fields.get("kind") and _tag(m) in location]
        known = {name for parent in (tagged or parents) for name in parent.model_fields}
        name = str(location[-1])
        guess = nearest(name, known)
        hint = f"did you mean {guess!r}?" if guess else f"known keys: {', '.join(sorted(known))}."
        return f"{key}: unknown key {name!r}; {hint}"
    if fault["type"] == "missing":
        return f"{key}: this key is missing; add it."
    message = fault["msg"].removeprefix("Value error, ")
    value = fault["input"]
    if fault["type"] in ("literal_error", "union_tag_invalid") and isinstance(value, str | dict):
        word = value if isinstance(value, str) else str(value.get("kind"))
        expected = fault["ctx"].get("expected") or fault["ctx"].get("expected_tags") or ""
        words = [part.strip(" '") for part in expected.replace(" or ", ",").split(",")]
        guess = nearest(word, words)
        hint = f" Did you mean {guess!r}?" if guess else ""
        return f"{key}: {word!r} is not one of {expected}.{hint}"
    if fault["type"] == "value_error" and not isinstance(value, str | int | float):
        return f"{key}: {message}" if key else message
    return f"{key}: {message} (found {value!r})."


def _tag(model: type[BaseModel]) -> str | None:
    arguments = get_args(model.model_fields["kind"].annotation)
    return arguments[0] if arguments else None


def faults_of(model: type[BaseModel], error: ValidationError, file: str) -> list[str]:
    """One sentence per fault, each opening with the file and the key."""
    return [f"{file}: {_sentence(model, fault)}" for fault in error.errors()]
