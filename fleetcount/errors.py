"""The one family of errors.

FleetcountError            what is wrong, where, what to do; exit status 2
├── InputError             a definition, option or file from the user
│   ├── LatticeError       a lattice file fails a check
│   └── SeriesError        a series that makes no sense
├── LedgerError            the ledger cannot be used: missing, locked, newer, unreachable, full
│   └── HeldError          another coordinator holds the series
├── FleetError             the processes that count cannot be started or reached
├── TrustError             stored numbers contradict each other; exit status 1
├── StoppedError           interrupted, can be resumed; exit status 3
└── InternalError          a broken promise of our own code; exit status 4
"""

from __future__ import annotations


class FleetcountError(Exception):
    """Base of all errors that the program raises on purpose.

    Args:
        what: what is wrong, one clause, without a full stop.
        where: the file, entry, unit or option it is about.
        mend: what to do about it, one clause.
    """

    exit_status = 2

    def __init__(self, what: str, *, where: str = "", mend: str = "") -> None:
        self.what, self.where, self.mend = what, where, mend
        super().__init__(what, where, mend)

    def __str__(self) -> str:
        text = f"{self.where}: {self.what}" if self.where else self.what
        text = f"{text}; {self.mend}" if self.mend else text
        return " ".join(text.split())

    def __reduce__(self) -> tuple[object, ...]:
        return (_rebuild, (type(self), self.what, self.where, self.mend))


def _rebuild(kind: type[FleetcountError], what: str, where: str, mend: str) -> FleetcountError:
    return kind(what, where=where, mend=mend)


class InputError(FleetcountError):
    """A definition, option or file from the user cannot be used."""


class LatticeError(InputError):
    """A lattice file fails a check."""


class SeriesError(InputError):
    """A series that makes no sense, or that no method can do."""


class LedgerError(FleetcountError):
    """The ledger cannot be used."""


class HeldError(LedgerError):
    """Another coordinator holds the series."""


class FleetError(FleetcountError):
    """The processes that count cannot be started or reached."""


class TrustError(FleetcountError):
    """Stored numbers contradict each other."""

    exit_status = 1


class StoppedError(FleetcountError):
    """Interrupted; nothing that was accepted is lost."""

    exit_status = 3


class InternalError(FleetcountError):
    """A broken promise of our own code."""

    exit_status = 4
