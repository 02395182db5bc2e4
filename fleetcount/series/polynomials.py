"""Generating polynomials: each length's terms as one polynomial in named variables, as computer algebra reads it."""

from __future__ import annotations

from typing import TYPE_CHECKING

from fleetcount.errors import InputError
from fleetcount.series.definition import Series

if TYPE_CHECKING:
    from fleetcount.series.table import CoefficientTable

_LETTERS = {
    "contacts": "c",
    "visits": "v",
    "turns": "t",
    "steps": "s",
    "span": "w",
    "height": "h",
    "area": "a",
    "revisits": "r",
}
"""Small letters that stand for nothing else where such texts are parsed."""


def variables(series: Series) -> tuple[str, ...]:
    """One for each column of the statistics; `c` for contacts, `v2` for visits of wall 2, `x1` for an end."""
    names: list[str] = []
    for one in series.statistics:
        if one.name == "end":
            names += one.columns(series.lattice)
            continue
        name = _LETTERS[one.name]
        if one.name == "visits" and one.wall != 1:
            name += str(one.wall)
        if one.direction and sum(other.name == one.name for other in series.statistics) > 1:
            name += "2" if f"{name}1" in names else "1"
        names.append(name)
    return tuple(names)


def polynomials(table: CoefficientTable, quantity: str = "count") -> dict[int, str]:
    """For each final length the polynomial whose coefficients are its terms: `{4: "92 + 8*c"}`.

    Args:
        quantity: "count", or a moment of the series, then still to be divided by the table's denominator.
    """
    known = ("count", *table.series.moments)
    if quantity not in known:
        raise InputError(f"no {quantity!r} in this table", mend=f"it has {', '.join(known)}")
    names, column = variables(table.series), known.index(quantity)
    terms: dict[int, list[str]] = {n: [] for n in table.counts()}
    for place, values in table.cells():
        if values[column]:
            terms[place[0]].append(_term(values[column], names, place[1:]))
    return {n: " + ".join(found) or "0" for n, found in terms.items()}


def _term(coefficient: int, names: tuple[str, ...], exponents: tuple[int, ...]) -> str:
    powers = [_power(name, e) for name, e in zip(names, exponents, strict=True) if e]
    return "*".join(powers if coefficient == 1 and powers else [str(coefficient), *powers])


def _power(name: str, exponent: int) -> str:
    if exponent == 1:
        return name
    return f"{name}**{exponent}" if exponent > 0 else f"{name}**({exponent})"


def text(table: CoefficientTable) -> str:
    """A line `n: polynomial` for each length, and comment lines with `#` that name series, quantity and variables."""
    series = table.series
    columns = [column for one in series.statistics for column in one.columns(series.lattice)]
    lines = [f"# {series.title()}"]
    lines += [f"# {name}: {column}" for name, column in zip(variables(series), columns, strict=True)]
    if table.divisor != 1:
        lines.append(f"# sums over the {table.divisor} sites of a cell: divide by {table.divisor}")
    for quantity in ("count", *series.moments):
        moment = quantity != "count" and table.denominator != 1
        lines.append(f"# {quantity}{f', to be divided by {table.denominator}' if moment else ''}")
        lines += [f"{n}: {polynomial}" for n, polynomial in polynomials(table, quantity).items()]
    return "\n".join(lines) + "\n"
