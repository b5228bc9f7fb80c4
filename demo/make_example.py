"""Make example_rendered/ anew: the demo study as generated, run to its report.

    python demo/make_example.py

The study is generated and run in a scratch folder and takes the place of example_rendered/
only when all of it has succeeded.
"""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
import tempfile
from pathlib import Path

from cookiecutter.main import cookiecutter

ROOT = Path(__file__).resolve().parent.parent
EXAMPLE = ROOT / "example_rendered"


def generate(folder: Path) -> Path:
    """The demo study with the answers that the prompts propose, in a new folder of ``folder``."""
    configuration = folder / "cookiecutter.yaml"
    configuration.write_text(f'replay_dir: "{folder / "replay"}"\n', encoding="utf-8")
    made = cookiecutter(
        str(ROOT), no_input=True, output_dir=str(folder), config_file=str(configuration)
    )
    for cache in Path(made).rglob("__pycache__"):
        shutil.rmtree(cache)
    return Path(made)


def execute(study: Path) -> None:
    """Run a study with this interpreter; raises CalledProcessError if it fails."""
    environment = {**os.environ, "PYTHONDONTWRITEBYTECODE": "1"}
    environment.pop("PYTHONPATH", None)
    command = [sys.executable, "-m", "epochtest", "run"]
    subprocess.run(command, cwd=study, env=environment, check=True)
    (study / "runs" / ".lock").unlink(missing_ok=True)


def main() -> None:
    """Replace example_rendered/ by a fresh one."""
    with tempfile.TemporaryDirectory(prefix="epochtest-example-") as scratch:
        study = generate(Path(scratch))
        execute(study)
        fresh = ROOT / ".example_rendered.partial"
        shutil.rmtree(fresh, ignore_errors=True)
        shutil.copytree(study, fresh)
        shutil.rmtree(EXAMPLE, ignore_errors=True)
        os.replace(fresh, EXAMPLE)
    print(f"{EXAMPLE.name}/ is made anew; look at {EXAMPLE.name}/runs/report.html.")


if __name__ == "__main__":
    main()
