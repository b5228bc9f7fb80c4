"""The command line of a study: a thin shell over the pipeline.

Every command ends with status 0 when all went well, 1 when something in the study must be
mended (one plain sentence says what), 2 when the command itself was mistyped.
"""

from __future__ import annotations

import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

import click

from epochtest import __version__
from epochtest.errors import EpochtestError
from epochtest.study.load import LoadedStudy, load_study, study_root
from epochtest.study.results import CAUTION

PLAIN_WIDTH = 120


@contextmanager
def plain_errors() -> Iterator[None]:
    """Turn every error a user can repair into its sentence and status 1."""
    try:
        yield
    except EpochtestError as error:
        click.echo(str(error), err=True)
        sys.exit(1)
    except KeyboardInterrupt:
        click.echo("Stopped; run again to go on from here.", err=True)
        sys.exit(130)


@click.group(epilog=CAUTION)
@click.version_option(__version__, prog_name="epochtest")
def main() -> None:
    """Test claims that sky events are followed by more (or fewer) earthquakes."""


@main.command()
def check() -> None:
    """Validate every file and say what each claim will do. Looks at no outcome."""
    with plain_errors():
        from epochtest.pipeline.check import check_study

        study = load_study()
        report = check_study(study)
        for line in report.lines:
            click.echo(line)
        for line in report.warnings:
            click.echo(f"Warning: {line}")
        if report.faults:
            for line in report.faults:
                click.echo(line, err=True)
            sys.exit(1)
        click.echo("The study is ready to run. No outcome was looked at.")


@main.command()
@click.argument("claims", nargs=-1, metavar="[CLAIM ...]")
@click.option("--workers", type=click.IntRange(min=1), help="Notebooks at a time [cores].")
def run(claims: tuple[str, ...], workers: int | None) -> None:
    """Run the study, or only the tests of the CLAIMs named; unchanged work is skipped."""
    with plain_errors():
        from epochtest.pipeline.run import run as run_study

        started = time.monotonic()
        study = load_study()
        chosen = tuple(study.claim(name) for name in claims) or None
        with progress() as listen:
            outcome = run_study(study, chosen, workers, listen)
        seconds = time.monotonic() - started
        if not outcome.made and not outcome.failed and not outcome.blocked:
            click.echo(
                f"Nothing has changed: all {len(outcome.skipped)} artifacts are as made "
                f"({seconds:.1f} s)."
            )
        else:
            click.echo(
                f"{len(outcome.made)} made, {len(outcome.skipped)} unchanged, "
                f"{len(outcome.failed)} failed, {len(outcome.blocked)} waiting "
                f"({seconds:.1f} s)."
            )
        if outcome.reported:
            show_findings(study)
        elif not outcome.failed:
            click.echo("The report follows when every claim is run: `python -m epochtest run`.")
        if outcome.failed:
            sys.exit(1)


@main.command()
def report() -> None:
    """Print the findings of the newest report and where it is."""
    with plain_errors():
        show_findings(load_study())


@main.command("add-catalog")
@click.argument("files", nargs=-1, required=True, type=click.Path(path_type=Path))
@click.option("--origin", required=True, help="Who published it and how it was obtained.")
@click.option("--licence", required=True, help="Terms under which it may be passed on.")
def add_catalog(files: tuple[Path, ...], origin: str, licence: str) -> None:
    """Copy catalog FILES into catalogs/ and write down where they came from."""
    with plain_errors():
        from epochtest.pipeline.add_catalog import add_catalogs

        names = add_catalogs(study_root(), files, origin, licence)
        listed = ", ".join(f'"{name}"' for name in names)
        click.echo(
            f"Recorded in catalogs/sources.toml. In study.toml, under [catalog]:\n"
            f"files = [{listed}]"
        )


def show_findings(study: LoadedStudy) -> None:
    """Print the findings table, the place of the report and the caution."""
    from epochtest.errors import MissingArtifactError
    from epochtest.pipeline.run import claim_results

    tested, sky = claim_results(study.root)
    if not tested and not sky:
        raise MissingArtifactError("runs/: no report yet; run `python -m epochtest run` first.")
    from rich.console import Console

    from epochtest.tables.findings import findings_text

    console = Console() if sys.stdout.isatty() else Console(width=PLAIN_WIDTH)
    if tested:
        console.print(findings_text(tested, console.width))
    for result in sky:
        click.echo(f"{result.claim.id} ({result.claim.kind}): {result.sentence}")
    if not tested:
        click.echo(CAUTION)
    click.echo("Report: runs/report.html")


@contextmanager
def progress() -> Iterator[Callable[[str, str, str], None]]:
    """A listener: a live bar on a terminal, one plain line per event elsewhere."""
    if not sys.stdout.isatty():
        yield _plain_line
        return
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeElapsedColumn

    with Progress(
        BarColumn(), MofNCompleteColumn(), TimeElapsedColumn(), TextColumn("{task.description}")
    ) as bar:
        task = bar.add_task("", total=0)
        running: list[str] = []
        total = 0

        def listen(name: str, event: str, detail: str) -> None:
            nonlocal total
            if event == "started":
                running.append(name)
            elif name in running:
                running.remove(name)
            if event == "total":
                total = int(detail)
                bar.update(task, total=total)
            if event in ("made", "failed", "skipped", "blocked"):
                bar.advance(task)
            if event == "failed":
                bar.console.print(f"FAILED {name}: {detail}", markup=False, highlight=False)
            bar.update(task, description=", ".join(running))

        yield listen


def _plain_line(name: str, event: str, detail: str) -> None:
    if event == "total":
        click.echo(f"{detail} steps")
    elif event == "failed":
        click.echo(f"FAILED {name}: {detail}", err=True)
    elif event == "blocked":
        click.echo(f"waiting {name}: something before it failed")
    elif event != "skipped":
        click.echo(f"{event} {name}")
