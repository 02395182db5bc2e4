"""Lattices of the tests' own, as a user would write them."""

from __future__ import annotations

from collections.abc import Sequence

from fleetcount.lattice import definition
from fleetcount.lattice.model import Lattice

Joint = tuple[str, str, tuple[int, ...]]


def lattice(
    sites: dict[str, tuple[str, ...]],
    edges: Sequence[Joint] = (),
    arcs: Sequence[Joint] = (),
    metric: str | None = None,
) -> Lattice:
    """A lattice with these sites, on a cell of unit squares (or cubes) unless the metric says otherwise."""
    dimension = len(next(iter(sites.values())))
    unit = str([[str(int(i == j)) for j in range(dimension)] for i in range(dimension)])
    lines = ['name = "own"', f"dimension = {dimension}", f"metric = {metric or unit}"]
    for name, at in sites.items():
        lines += ["[[sites]]", f'name = "{name}"', f"at = {list(at)}"]
    for kind, joints in (("edges", edges), ("arcs", arcs)):
        for source, target, cell in joints:
            lines += [f"[[{kind}]]", f'from = "{source}"', f'to = "{target}"', f"cell = {list(cell)}"]
    return definition.parse("\n".join(lines), "own.toml")


def two_way_chain() -> Lattice:
    """A chain of arcs, one each way."""
    return lattice({"a": ("0",)}, arcs=[("a", "a", (1,)), ("a", "a", (-1,))])


def two_way_square() -> Lattice:
    """The square lattice, each edge as two arcs."""
    steps = ((1, 0), (-1, 0), (0, 1), (0, -1))
    return lattice({"a": ("0", "0")}, arcs=[("a", "a", step) for step in steps])


def mixed_square() -> Lattice:
    """The square lattice with one-way rows and two-way columns."""
    return lattice({"a": ("0", "0")}, edges=[("a", "a", (0, 1))], arcs=[("a", "a", (1, 0))])


def double_square() -> Lattice:
    """The square lattice on a cell of two sites, which is not primitive."""
    joints = [("a", "b", (0, 0)), ("b", "a", (1, 0)), ("a", "a", (0, 1)), ("b", "b", (0, 1))]
    metric = '[["4", "0"], ["0", "1"]]'
    return lattice({"a": ("0", "0"), "b": ("1/2", "0")}, edges=joints, metric=metric)
