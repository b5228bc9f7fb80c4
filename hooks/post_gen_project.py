"""Finish the new study: record the answers, leave out the demo if it is not wanted, say what next.

Runs in the folder of the study. The answers stand inside a string, so this file is valid
Python before it is rendered too.
"""

import ast
import json
import os
import shutil
from pathlib import Path

ANSWERS = r"""{{ cookiecutter | tojson }}"""

DEMO_FILES = ("claims/*.toml", "catalogs/*.csv")
# Folders copied whole may bring along what an interpreter left in the template.
LEFTOVERS = ("__pycache__", ".ipynb_checkpoints")
NEXT_STEPS = """
The study is in {folder}. Next, inside that folder:

    python3 -m venv .venv
    .venv/bin/pip install --require-hashes -r requirements.lock
{steps}
"""
STEPS = {
    "yes": """    .venv/bin/python -m epochtest check
    .venv/bin/python -m epochtest run""",
    "no": """    .venv/bin/python -m epochtest add-catalog FILE --origin "..." --licence "..."
    (name the file in study.toml, write a claim after claims/example.toml.txt)
    .venv/bin/python -m epochtest check
    .venv/bin/python -m epochtest run""",
}
CAUTION = (
    "No finding is an earthquake forecast or warning. For hazard and safety follow your\n"
    "national seismological and civil-protection authorities."
)


def version_of(init):
    """The value of ``__version__`` in a module that is read, not imported."""
    for statement in ast.parse(init.read_text(encoding="utf-8")).body:
        if isinstance(statement, ast.Assign) and statement.targets[0].id == "__version__":
            return ast.literal_eval(statement.value)
    raise SystemExit(f"{init}: no __version__ found; the template is damaged.")


def write(path, text):
    """Write ``text`` in one step: the file is there as a whole or not at all."""
    fresh = path.with_name(path.name + ".new")
    fresh.write_text(text, encoding="utf-8", newline="\n")
    os.replace(fresh, path)


def leave_out_the_demo(folder):
    """Remove the demo's claims and catalog, and its block of catalogs/sources.toml."""
    for pattern in DEMO_FILES:
        for path in folder.glob(pattern):
            path.unlink()
    sources = folder / "catalogs" / "sources.toml"
    opening = sources.read_text(encoding="utf-8").partition("\n[[source]]")[0]
    write(sources, opening.rstrip("\n") + "\n")


def main():
    """Do all of it."""
    folder = Path.cwd()
    answers = {key: value for key, value in json.loads(ANSWERS).items() if key[0] != "_"}
    for name in LEFTOVERS:
        for path in list(folder.rglob(name)):
            shutil.rmtree(path)
    if answers["include_demo"] == "no":
        leave_out_the_demo(folder)
    record = {
        "template": "epochtest",
        "template_version": version_of(folder / "epochtest" / "__init__.py"),
        "answers": answers,
    }
    write(folder / "answers.json", json.dumps(record, indent=2, ensure_ascii=False) + "\n")
    print(NEXT_STEPS.format(folder=folder.name, steps=STEPS[answers["include_demo"]]))
    print(CAUTION)


if __name__ == "__main__":
    main()
