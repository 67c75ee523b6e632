"""What can go wrong, by whose fault it is and what the caller should do next.

Every error has one clear sentence (`message`), what to do about it (`remedy`), a `kind` for scripts and the documented exit
status. Further facts are fields in `details`, not only text.
"""

from __future__ import annotations

from typing import Any


class DwellbenchError(Exception):
    """Base of all errors of this package.

    Attributes: kind (snake_case, for scripts), message, remedy, exit (status of the command line), details.
    """

    kind = "error"
    exit = 1
    measured: Any = None
    """What had been measured when it happened (a RawTrace), for errors that end a run; no part of the document."""

    def __init__(self, message: str, *, remedy: str = "", **details: Any) -> None:
        super().__init__(message)
        self.message = message
        self.remedy = remedy
        self.details = details

    def as_json(self) -> dict[str, Any]:
        """Return the error document of the command line."""
        document = {"kind": self.kind, "message": self.message, "remedy": self.remedy, "exit": self.exit}
        return {"error": {**document, **self.details}}


class UsageError(DwellbenchError):
    """Wrong usage or input: the caller can mend it."""

    kind = "usage"
    exit = 2


class MarkingError(UsageError):
    """A marking that cannot be read, or reads in more than one way; `details["readings"]` are markings to choose from."""

    kind = "marking"

    @property
    def readings(self) -> list[str]:
        """The unambiguous markings it might have meant."""
        return list(self.details.get("readings", []))


class TraceError(UsageError):
    """A trace that is not one, or not whole."""

    kind = "trace"


class RefusedError(DwellbenchError):
    """The box refused a request; `details` has its code and data."""

    kind = "refused"
    exit = 5


class FaultError(DwellbenchError):
    """The box found a fault, or is locked out."""

    kind = "fault"
    exit = 6


class LinkError(DwellbenchError):
    """The link to the box broke."""

    kind = "link"
    exit = 7


class NoBoxError(LinkError):
    """Nothing there, or nothing that may be opened."""

    kind = "no_box"


class WrongBoxError(LinkError):
    """What answers is not a box, or speaks another major version of the wire."""

    kind = "wrong_box"


class StoreError(DwellbenchError):
    """The records cannot be used."""

    kind = "store"
    exit = 8


class StoppedError(DwellbenchError):
    """The user stopped it; discharge was proven unless the message says otherwise."""

    kind = "stopped"
    exit = 130


class BugError(DwellbenchError):
    """Our own defect."""

    kind = "bug"
    exit = 1
