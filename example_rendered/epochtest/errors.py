"""The exceptions of the library: one base class, each child also a builtin.

A message is one plain sentence: what is wrong, where, the value found, what to do.
Every error carries the facts it speaks of as attributes and survives pickling, because
claims are run in worker processes.
"""

from __future__ import annotations

from typing import Any


class EpochtestError(Exception):
    """Base of all errors that a user can repair.

    Keyword arguments become attributes, so that a caller can act on the facts
    (row numbers, covered dates) without parsing the sentence.
    """

    def __init__(self, message: str, **facts: Any) -> None:
        super().__init__(message)
        self.message = message
        self.facts = facts
        for name, value in facts.items():
            setattr(self, name, value)

    def __reduce__(self) -> tuple[Any, ...]:
        return (_rebuild, (type(self), self.message, self.facts))

    def __str__(self) -> str:
        return self.message


def _rebuild(kind: type[EpochtestError], message: str, facts: dict[str, Any]) -> EpochtestError:
    return kind(message, **facts)


class ProtocolError(EpochtestError, ValueError):
    """A fault in study.toml, a claim or sources.toml; ``faults`` lists every sentence."""

    @classmethod
    def of(cls, faults: list[str]) -> ProtocolError:
        """Make one error of all the faults found, one line each."""
        return cls("\n".join(faults), faults=faults)


class CatalogError(EpochtestError, ValueError):
    """A catalog file that cannot be read as a whole (single bad rows are quarantined)."""


class ChangedInputError(CatalogError):
    """An input file differs from the SHA-256 written down for it; ``file`` names it."""


class EphemerisSpanError(EpochtestError, ValueError):
    """Instants outside the kernel; ``covered`` holds its first and last date (ISO, UTC)."""


class MissingArtifactError(EpochtestError, FileNotFoundError):
    """A result that an earlier step should have made is not there."""


class NotebookError(EpochtestError, RuntimeError):
    """A notebook stopped; ``notebook`` is the kept file, ``cell`` the failing cell's number."""


class BusyError(EpochtestError, RuntimeError):
    """Another run is at work in the same study."""
