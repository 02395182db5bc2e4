"""The Python interface."""

from __future__ import annotations

import contextlib
import os
from typing import TYPE_CHECKING, Any

from fleetcount.errors import InputError, SeriesError, StoppedError

if TYPE_CHECKING:
    from distributed import Client

    from fleetcount.ledger.store import Store
    from fleetcount.series.table import CoefficientTable


def count(
    lattice: str | os.PathLike[str],
    object: str,  # noqa: A002 - the field's word
    *,
    to: int,
    start: str | None = None,
    ledger: str | os.PathLike[str] | Store | None = None,
    cores: int | None = None,
    client: Client | None = None,
) -> CoefficientTable:
    """Count a series exactly and return its coefficient table.

    Args:
        lattice: a name from the catalogue, or the path of a lattice file.
        object: "walk" or "polygon".
        to: greatest length.
        start: name of the start site, where the sites of the lattice are not all alike.
        ledger: path or URL of a ledger that keeps the tallies, so that a later call goes on where this one was
            stopped; an open ledger; None: memory only.
        cores: cores of this machine to count on; None: all.
        client: an open Dask client to count on instead.

    Raises:
        FleetcountError: bad input, an unusable ledger, or stored numbers that contradict each other.
        KeyboardInterrupt: interrupted; what was counted so far is in the ledger.
    """
    from fleetcount.fleet.counting import Options, count_series
    from fleetcount.lattice.catalogue import find
    from fleetcount.ledger.access import open_store
    from fleetcount.series.definition import define

    if isinstance(to, bool) or not isinstance(to, int):
        raise SeriesError(f"the greatest length is {to!r}", where="to", mend="give a whole number")
    if cores is not None and (
        isinstance(cores, bool) or not isinstance(cores, int) or not 1 <= cores <= 1024
    ):
        raise InputError(f"{cores!r} cores", where="cores", mend="give a whole number from 1 to 1024")
    series = define(find(lattice), object, start)
    with contextlib.ExitStack() as stack:
        store: Any = ledger
        if ledger is None or isinstance(ledger, (str, os.PathLike)):
            where = ":memory:" if ledger is None else os.fspath(ledger)
            store = stack.enter_context(open_store(where, create=True))
        try:
            return count_series(store, series, to, Options(cores=cores, client=client))
        except StoppedError as error:
            raise KeyboardInterrupt(str(error)) from error
