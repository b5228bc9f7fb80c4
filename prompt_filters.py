"""Filters that the templates and the prompts use; loaded by cookiecutter from this folder."""

from __future__ import annotations

import json
import re

from click import ClickException
from jinja2 import Environment
from jinja2.ext import Extension

_BASIC_PLANE_END = 0xFFFF
_UNFIT_IN_FOLDER_NAMES = re.compile(r'[/\\:*?"<>|\x00-\x1f\ud800-\udfff]')
_LONGEST_FILE_NAME_BYTES = 255  # of the common file systems


def quoted(value: object) -> str:
    """``value`` as a double-quoted string that TOML, YAML and JSON all read back unchanged.

    JSON's own escapes of characters beyond U+FFFF are surrogate pairs, which TOML 1.0 forbids;
    such characters stay as they are. Unprintable ones (DEL, U+2028, ...) become ``\\uXXXX``.
    """
    return "".join(
        sign if sign.isprintable() or ord(sign) > _BASIC_PLANE_END else f"\\u{ord(sign):04x}"
        for sign in json.dumps(str(value), ensure_ascii=False)
    )


def in_markdown(value: object) -> str:
    """``value`` as CommonMark text that shows every sign (section 2.4, backslash escapes)."""
    return re.sub(r"([\\`*_\[\]<>#|&~$])", r"\\\1", str(value))


def plain_folder_name(value: str) -> str:
    """``value`` unless a folder of that name could not be made here, or would lie elsewhere.

    cookiecutter makes the folder before it asks the pre-generation hook, so an empty or
    path-like name has to be refused while the answers are read.
    """
    too_long = len(value.encode("utf-8", "replace")) > _LONGEST_FILE_NAME_BYTES
    if too_long or value.strip(" .") == "" or _UNFIT_IN_FOLDER_NAMES.search(value):
        raise ClickException(
            f"project_slug: {value!r} is no plain folder name; "
            "give one such as tessaline-arc, without dots, slashes or colons."
        )
    return value


class PromptFilters(Extension):
    """Adds the filters above to cookiecutter's Jinja environment."""

    def __init__(self, environment: Environment) -> None:
        super().__init__(environment)
        for each in (quoted, in_markdown, plain_folder_name):
            environment.filters[each.__name__] = each
