"""The steps of a study and the key of each: what goes in, hashed; what must be made first.

::

    1_catalog --+-- 3_superposed_epoch.<claim> --+      timing claims
                |     2_epochs.<claim> --+       |
                +-- 3_forcing.<claim> -----------+      forcing claims
                    3_recurrence.<claim> --------+-- 4_report

A key holds the notebook, its inputs by content, the parts of the protocol that the step reads,
the library and the package versions; upstream artifacts enter by their own keys. Nothing is
computed to make a plan, so it shows within a second what a change has touched.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

from epochtest.catalog.sources import verify_sources
from epochtest.files import sha256_of
from epochtest.pipeline.hashing import key_of, library_sha256, package_versions
from epochtest.pipeline.store import Slot
from epochtest.study.claims import Claim, ForcingClaim, RecurrenceClaim, TimingClaim
from epochtest.study.events import ListedDates
from epochtest.study.load import LoadedStudy

CATALOG = "1_catalog"
EPOCHS = "2_epochs"
SUPERPOSED = "3_superposed_epoch"
RECURRENCE = "3_recurrence"
FORCING = "3_forcing"
REPORT = "4_report"


@dataclass(frozen=True)
class Step:
    """One notebook to run: where its artifact goes, what it is given, what it needs."""

    slot: Slot
    notebook: str
    parameters: dict[str, Any]
    ingredients: dict[str, Any]
    needs: tuple[str, ...] = ()

    @property
    def name(self) -> str:
        """Step name, such as ``2_epochs.full-moon``."""
        return self.slot.step


class Plan:
    """All steps of a study in an order that respects their needs."""

    def __init__(self, study: LoadedStudy) -> None:
        self.study = study
        verify_sources(study.root, study.settings.catalog.files, study.sources)

    def _step(
        self,
        name: str,
        notebook: str,
        ingredients: dict[str, Any],
        parameters: dict[str, Any],
        needs: tuple[str, ...] = (),
    ) -> Step:
        everything = {
            "notebook": sha256_of(self.study.root / "notebooks" / f"{notebook}.ipynb"),
            "library": library_sha256(),
            "packages": package_versions(),
            **ingredients,
        }
        slot = Slot(name, key_of(everything))
        return Step(slot, notebook, {**parameters, "output": slot.partial}, everything, needs)

    def _file_hash(self, name: str) -> str:
        path = self.study.root / name
        return sha256_of(path) if path.is_file() else "missing"

    @cached_property
    def catalog(self) -> Step:
        """Reading and cleaning the catalog."""
        study = self.study
        ingredients = {
            "sources": [
                source.model_dump(mode="json")
                for source in study.sources.source
                if source.file in study.settings.catalog.files
            ],
            "catalog": study.settings.catalog.model_dump(mode="json"),
            "span": study.settings.span.model_dump(mode="json"),
        }
        return self._step(CATALOG, CATALOG, ingredients, {})

    def epochs(self, claim: TimingClaim) -> Step:
        """The event set of one claim."""
        settings = self.study.settings
        ingredients = {
            "claim": claim.id,
            "event": claim.event.model_dump(mode="json"),
            "window_days": list(claim.window_days),
            "span": settings.span.model_dump(mode="json"),
            "kernel": settings.ephemeris.kernel,
        }
        if isinstance(claim.event, ListedDates):
            ingredients["listed"] = self._file_hash(claim.event.file)
        return self._step(f"{EPOCHS}.{claim.id}", EPOCHS, ingredients, {"claim": claim.id})

    def superposed(self, claim: TimingClaim) -> Step:
        """The test of one claim."""
        epochs, settings = self.epochs(claim), self.study.settings
        selection = self.study.selection_of(claim)
        ingredients = {
            "claim": claim.model_dump(mode="json"),
            "selection": selection.model_dump(mode="json"),
            "inference": settings.inference.model_dump(mode="json"),
            "span": settings.span.model_dump(mode="json"),
            "catalog": self.catalog.slot.key,
            "epochs": epochs.slot.key,
        }
        if selection.polygon is not None:
            ingredients["polygon"] = self._file_hash(selection.polygon)
        parameters = {
            "claim": claim.id,
            "catalog_artifact": self.catalog.slot.folder,
            "epochs_artifact": epochs.slot.folder,
        }
        name = f"{SUPERPOSED}.{claim.id}"
        return self._step(
            name, SUPERPOSED, ingredients, parameters, (self.catalog.name, epochs.name)
        )

    def recurrence(self, claim: RecurrenceClaim) -> Step:
        """The occurrences of one configuration over the whole kernel."""
        ingredients = {
            "claim": claim.model_dump(mode="json"),
            "kernel": self.study.settings.ephemeris.kernel,
        }
        return self._step(f"{RECURRENCE}.{claim.id}", RECURRENCE, ingredients, {"claim": claim.id})

    def forcing(self, claim: ForcingClaim) -> Step:
        """The tides of all bodies at a place, and the tidal phases of the catalog."""
        settings, selection = self.study.settings, self.study.selection_of(claim)
        ingredients = {
            "claim": claim.model_dump(mode="json"),
            "selection": selection.model_dump(mode="json"),
            "span": settings.span.model_dump(mode="json"),
            "kernel": settings.ephemeris.kernel,
            "catalog": self.catalog.slot.key,
        }
        if selection.polygon is not None:
            ingredients["polygon"] = self._file_hash(selection.polygon)
        parameters = {"claim": claim.id, "catalog_artifact": self.catalog.slot.folder}
        return self._step(
            f"{FORCING}.{claim.id}", FORCING, ingredients, parameters, (self.catalog.name,)
        )

    def of(self, claim: Claim) -> list[Step]:
        """The steps of one claim; the last one holds its result."""
        match claim:
            case TimingClaim():
                return [self.epochs(claim), self.superposed(claim)]
            case RecurrenceClaim():
                return [self.recurrence(claim)]
            case ForcingClaim():
                return [self.forcing(claim)]

    @cached_property
    def report(self) -> Step:
        """All claims together: the family, the findings, the report."""
        study = self.study
        epochs = {claim.id: self.epochs(claim).slot for claim in study.timing_claims}
        tests = {claim.id: self.of(claim)[-1].slot for claim in study.claims}
        ingredients = {
            "settings": study.settings.model_dump(mode="json"),
            "sources": study.sources.model_dump(mode="json"),
            "protocol": {
                name: self._file_hash(name)
                for name in ("study.toml", *(f"claims/{claim.id}.toml" for claim in study.claims))
            },
            "catalog": self.catalog.slot.key,
            "epochs": {name: slot.key for name, slot in epochs.items()},
            "tests": {name: slot.key for name, slot in tests.items()},
        }
        parameters = {
            "catalog_artifact": self.catalog.slot.folder,
            "epochs_artifacts": {name: slot.folder for name, slot in epochs.items()},
            "test_artifacts": {name: slot.folder for name, slot in tests.items()},
        }
        needs = (self.catalog.name, *(slot.step for slot in (*epochs.values(), *tests.values())))
        return self._step(REPORT, REPORT, ingredients, parameters, needs)

    def steps(self, claims: tuple[Claim, ...] | None = None) -> list[Step]:
        """Every step, or those up to the tests of the named claims (then without the report)."""
        chosen = self.study.claims if claims is None else claims
        by_claim = [self.of(claim) for claim in chosen]
        steps = [self.catalog]
        steps += [step for steps_of_claim in by_claim for step in steps_of_claim[:-1]]
        steps += [steps_of_claim[-1] for steps_of_claim in by_claim]
        if claims is None:
            steps.append(self.report)
        return steps
