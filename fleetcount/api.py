"""The Python interface."""

from __future__ import annotations

import contextlib
import os
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from fleetcount.errors import InputError, SeriesError, StoppedError

if TYPE_CHECKING:
    from distributed import Client

    from fleetcount.ledger.store import Store
    from fleetcount.series.table import CoefficientTable


def count(
    lattice: str | os.PathLike[str],
    object: str | None = None,  # noqa: A002 - the field's word
    *,
    to: int | None = None,
    start: str | None = None,
    end: str | None = None,
    by: str | Sequence[str] = (),
    moment: str | Sequence[str] = (),
    region: str | None = None,
    ledger: str | os.PathLike[str] | Store | None = None,
    cores: int | None = None,
    client: Client | None = None,
) -> CoefficientTable:
    """Count a series exactly and return its coefficient table.

    Args:
        lattice: a name from the catalogue, or the path of a lattice file; without `object` that of a series file.
        object: "walk", "polygon", "trail", "closed-trail", "neighbour-avoiding", "bridge" or "trapped".
        to: greatest length; may be left out where a series file names it.
        start: a site's name, a cell "0,3" or both "0,3:a"; needed where the sites of the lattice are not all alike
            and a direction or region is named.
        end: cell, or cell and site, where walks have to end.
        by: up to two statistics that refine the count, such as "contacts" or "visits:2".
        moment: exact sums beside the count, such as "end2".
        region: "half", "quarter", "orthant", "wedge", "slab:W", "box:A,B,...", "tube:A,...".
        ledger: path or URL of a ledger that keeps the tallies, so that a later call goes on where this one was
            stopped; an open ledger; None: memory only.
        cores: cores of this machine to count on; None: all.
        client: an open Dask client to count on instead.

    Raises:
        FleetcountError: bad input, an unusable ledger, or stored numbers that contradict each other.
        KeyboardInterrupt: interrupted; what was counted so far is in the ledger.
    """
    from fleetcount.fleet.counting import Options, count_series
    from fleetcount.ledger.access import open_store
    from fleetcount.series.files import asked

    if to is not None and (isinstance(to, bool) or not isinstance(to, int)):
        raise SeriesError(f"the greatest length is {to!r}", where="to", mend="give a whole number")
    if cores is not None and (
        isinstance(cores, bool) or not isinstance(cores, int) or not 1 <= cores <= 1024
    ):
        raise InputError(f"{cores!r} cores", where="cores", mend="give a whole number from 1 to 1024")
    for name, value in {"object": object, "start": start, "end": end, "region": region}.items():
        if value is not None and not isinstance(value, str):
            raise SeriesError(f"{value!r} is no text", where=name, mend="give it as the command line does")
    names, sums = _texts("by", by), _texts("moment", moment)
    definition = asked(lattice, object, to, start=start, end=end, by=names, moment=sums, region=region)
    if definition.to is None:
        raise SeriesError("up to which length?", where="to", mend="give a whole number")
    series = definition.series()
    with contextlib.ExitStack() as stack:
        store: Any = ledger
        if ledger is None or isinstance(ledger, (str, os.PathLike)):
            where = ":memory:" if ledger is None else os.fspath(ledger)
            store = stack.enter_context(open_store(where, create=True))
        try:
            return count_series(store, series, definition.to, Options(cores=cores, client=client))
        except StoppedError as error:
            raise KeyboardInterrupt(str(error)) from error


def _texts(name: str, texts: str | Sequence[str]) -> Sequence[str]:
    """One text, or a sequence of them."""
    if isinstance(texts, str):
        return (texts,)
    if not isinstance(texts, Sequence) or not all(isinstance(text, str) for text in texts):
        raise SeriesError(f"{texts!r} are no names", where=name, mend="give a name, or a list of names")
    return texts
