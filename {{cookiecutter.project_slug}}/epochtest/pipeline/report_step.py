"""4_report: all claims of a study together - the family paid for, the findings, the page.

Every test is computed again from the catalog and the epochs of the artifacts, because the
joint null needs all claims at the same shifts; a number that differs from the artifact of
3_superposed_epoch stops the report.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from epochtest import __version__, charts, tables
from epochtest.errors import MissingArtifactError
from epochtest.files import sha256_of
from epochtest.inference.finding import decide, sentence
from epochtest.inference.multiplicity import adjust_family
from epochtest.inference.superposed import with_family
from epochtest.pipeline import catalog_step, epochs_step, forcing_step, recurrence_step
from epochtest.pipeline.block import Block, Shown, heading, link, opening, paragraph, stacked
from epochtest.pipeline.catalog_step import CatalogStep
from epochtest.pipeline.forcing_step import ForcingStep
from epochtest.pipeline.frames import artifact_folder, output_folder, result_text
from epochtest.pipeline.hashing import library_sha256, package_versions
from epochtest.pipeline.recurrence_step import RecurrenceStep
from epochtest.pipeline.store import RESULT
from epochtest.pipeline.superposed_step import SuperposedStep, tested
from epochtest.study.load import LoadedStudy, load_study
from epochtest.study.results import CAUTION, ClaimResult
from epochtest.study.sky_results import ForcingResult, RecurrenceResult

# Anchors set in 4_report.ipynb.
SECTIONS = {
    "findings": "Findings",
    "claims": "The claims, one by one",
    "nulls": "Nulls side by side",
    "catalog": "The catalog",
    "epochs": "The epochs",
    "provenance": "Provenance",
    "cautions": "Cautions",
}


@dataclass(frozen=True)
class ReportStep:
    """Every claim decided, and the parts of the page."""

    study: LoadedStudy
    catalog: CatalogStep
    tests: tuple[SuperposedStep, ...]
    recurrences: tuple[RecurrenceStep, ...] = ()
    forcings: tuple[ForcingStep, ...] = ()

    @cached_property
    def results(self) -> tuple[ClaimResult, ...]:
        """The timing claims, decided together, in the order of the claim files."""
        if not self.tests:
            return ()
        settings = self.study.settings.inference

        def row(j: int) -> np.ndarray:
            test = self.tests[j]
            statistics = test.series.shifts.standardised(test.claim.direction)
            return statistics.astype(np.float32)

        plain = [test.result for test in self.tests]
        family, critical = adjust_family(plain, row, settings)
        decided = []
        for test, adjustment, limit in zip(self.tests, family, critical, strict=True):
            result = with_family(test.result, limit)
            reach = result.effect.detectable_ratio_family
            finding = decide(result, adjustment, settings.alpha, reach)
            decided.append(
                ClaimResult(
                    finding=finding,
                    sentence=sentence(finding, result, adjustment, settings.alpha, reach),
                    test=result,
                    epochs=test.epochs.result,
                    family=adjustment,
                )
            )
        return tuple(decided)

    @property
    def sky_results(self) -> tuple[RecurrenceResult | ForcingResult, ...]:
        """The claims about the sky alone."""
        return (
            *(step.result for step in self.recurrences),
            *(step.result for step in self.forcings),
        )

    def title(self) -> Block:
        """Name, question and who answers for the study."""
        about = self.study.settings.about
        who = ", ".join(part for part in (about.author, about.lab) if part)
        pieces = [heading(1, about.title)]
        pieces += [paragraph(text) for text in (about.question, who) if text]
        return stacked(*pieces)

    def caution(self) -> Block:
        """No forecast, no warning."""
        return paragraph(CAUTION, "caution")

    def contents(self) -> Block:
        """Links to the sections and to every claim."""
        claims = " · ".join(link(f"claim-{c.id}", c.title) for c in self.study.claims)
        parts = [link(anchor, words) for anchor, words in SECTIONS.items()]
        parts[1] += f" ({claims})"
        items = "".join(f"<li>{part}</li>" for part in parts)
        return Block(f'<nav aria-label="Contents"><ul>{items}</ul></nav>', "Contents")

    def findings(self) -> Block:
        """One row per claim: the tested ones, then those about the sky alone."""
        pieces: list[Shown] = []
        if self.results:
            pieces.append(tables.html(tables.findings_table(self.results), "Findings"))
        if self.sky_results:
            frame = tables.sky_findings_table(self.sky_results)
            pieces.append(tables.html(frame, "Claims about the sky alone"))
        return stacked(*pieces)

    def effects(self) -> charts.Figure:
        """Rate ratios of all claims on one axis."""
        return charts.effect_chart(charts.effect_rows(self.results))

    def claims(self) -> Block:
        """One section per claim."""
        pairs = zip(self.tests, self.results, strict=True)
        return stacked(
            *(self._claim(test, result) for test, result in pairs),
            *(step.section() for step in self.recurrences),
            *(step.section() for step in self.forcings),
        )

    def _claim(self, test: SuperposedStep, result: ClaimResult) -> Block:
        return stacked(
            opening(test.claim),
            paragraph(result.sentence, "decision"),
            test.notes(),
            test.decided_before(),
            test.lag_chart(),
            test.null_chart(),
            test.timeline(),
            tables.html(tables.test_table(result.test, result.family), "The test in numbers"),
        )

    def nulls(self) -> tables.HtmlTable:
        """The nulls side by side."""
        return tables.html(tables.nulls_table(self.results), "Nulls and the price of the family")

    def base_rates(self) -> tables.HtmlTable:
        """How often each sky event happens."""
        return tables.html(
            tables.base_rates_table([test.epochs.result for test in self.tests]),
            "Base rates of the sky events",
        )

    def family(self) -> Block:
        """Base rates of the line-ups that claims of this study could have chosen from."""
        for test in self.tests:
            if test.epochs.result.family is not None:
                return test.epochs.family()
        return paragraph("No claim of this study is about a line-up of Sun and planets.")

    def epoch_charts(self) -> Block:
        """Epochs per year and the intervals between them, claim by claim."""
        pieces: list[Block | charts.Figure] = []
        for test in self.tests:
            pieces += [
                heading(3, f"Epochs of {test.claim.title}"),
                test.epochs.per_year(),
                test.epochs.intervals(),
                test.epochs.notes(),
            ]
        return stacked(*pieces)

    def provenance(self) -> tables.HtmlTable:
        """Everything that went into the numbers, by hash and version."""
        facts: dict[str, object] = {
            "epochtest": __version__,
            "library SHA-256": library_sha256(),
            "study.toml SHA-256": sha256_of(self.study.root / "study.toml"),
        }
        for claim in self.study.claims:
            name = f"claims/{claim.id}.toml"
            facts[f"{name} SHA-256"] = sha256_of(self.study.root / name)
        for file in self.catalog.result.files:
            facts[f"{file.file} SHA-256"] = file.sha256
        facts["seed"] = self.study.settings.inference.seed
        facts["ephemeris"] = self.study.settings.ephemeris.kernel
        facts.update(package_versions())
        return tables.html(tables.provenance_table(facts), "Provenance")

    def save(self, output: str) -> str:
        """Write one result per claim and findings.csv into ``output``; says what was done."""
        folder = output_folder(self.study.root, output)
        if folder is None:
            return "Nothing written: no output folder was given."
        (folder / "results").mkdir(exist_ok=True)
        for result in (*self.results, *self.sky_results):
            path = folder / "results" / f"{_claim_id(result)}.json"
            path.write_text(result_text(result), encoding="utf-8", newline="\n")
        table = tables.findings_numbers(self.results, self.sky_results)
        table.to_csv(
            folder / "findings.csv", index=False, lineterminator="\n", float_format="%.12g"
        )
        return f"{len(self.results) + len(self.sky_results)} findings written."


def compute(
    catalog_artifact: str = "",
    epochs_artifacts: Mapping[str, str] | None = None,
    test_artifacts: Mapping[str, str] | None = None,
) -> ReportStep:
    """The step for a notebook: every claim of the study around the working folder."""
    study = load_study()
    catalog = catalog_step.load(study, catalog_artifact)
    epochs_at, tests_at = epochs_artifacts or {}, test_artifacts or {}
    tests = []
    for claim in study.timing_claims:
        epochs = epochs_step.load(study.root, claim, epochs_at.get(claim.id, ""))
        test = tested(study, claim, catalog, epochs)
        step = f"3_superposed_epoch.{claim.id}"
        folder = artifact_folder(study.root, tests_at.get(claim.id, ""), step)
        if (folder / RESULT).read_text(encoding="utf-8") != result_text(test.result):
            raise MissingArtifactError(
                f"{step}: its result is not what its catalog and epochs give; "
                "run `python -m epochtest run` again.",
                step=step,
            )
        tests.append(test)
    recurrences = [
        recurrence_step.load(study.root, claim, tests_at.get(claim.id, ""))
        for claim in study.recurrence_claims
    ]
    forcings = [
        forcing_step.load(study, claim, catalog, tests_at.get(claim.id, ""))
        for claim in study.forcing_claims
    ]
    return ReportStep(study, catalog, tuple(tests), tuple(recurrences), tuple(forcings))


def _claim_id(result: ClaimResult | RecurrenceResult | ForcingResult) -> str:
    return result.test.claim.id if isinstance(result, ClaimResult) else result.claim.id
