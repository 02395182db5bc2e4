"""The patch: equal to a plain breadth-first search, and refused before it fills the memory."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fleetcount.errors import InputError
from fleetcount.lattice import catalogue, definition, patch
from fleetcount.lattice.keys import Keys
from fleetcount.lattice.model import Cell, Lattice
from fleetcount.lattice.patch import FAR, Allowed, Patch
from tests.strategies import small_lattices

Node = tuple[int, Cell]


def neighbours(lattice: Lattice, node: Node) -> list[Node]:
    kind, cell = node
    return [
        (arc.target, tuple(a + b for a, b in zip(cell, arc.cell, strict=True))) for arc in lattice.arms[kind]
    ]


def inside(allowed: Allowed | None, node: Node, start: int) -> bool:
    if allowed is None or node == (start, (0,) * len(node[1])):
        return True
    return bool(allowed(np.array([node[0]]), np.array([node[1]]))[0])


def plain_depths(lattice: Lattice, start: int, radius: int, allowed: Allowed | None) -> dict[Node, int]:
    """Sites within reach, by breadth-first search in plain Python."""
    first = (start, (0,) * lattice.periods)
    depths = {first: 0}
    queue = [first]
    for node in queue:
        if depths[node] == radius:
            break
        for near in neighbours(lattice, node):
            if near not in depths and inside(allowed, near, start):
                depths[near] = depths[node] + 1
                queue.append(near)
    return depths


def check_patch(built: Patch, allowed: Allowed | None) -> None:
    lattice = built.lattice
    depths = plain_depths(lattice, built.start, built.radius, allowed)
    nodes = [(int(k), tuple(map(int, c))) for k, c in zip(built.kind, built.cells, strict=True)]
    numbers = {node: number for number, node in enumerate(nodes) if number}
    assert {node: int(built.depth[number]) for node, number in numbers.items()} == depths
    assert nodes[1] == (built.start, (0,) * lattice.periods)
    assert (np.diff(built.depth[1:]) >= 0).all()
    assert not built.next[0].any() and not built.previous[0].any() and not built.free[0]
    coming: dict[int, list[int]] = {number: [] for number in numbers.values()}
    for node, number in numbers.items():
        near = neighbours(lattice, node)
        following = [numbers.get(n, 0) for n in near]
        assert built.next[number].tolist() == following + [0] * (built.next.shape[1] - len(near))
        assert built.free[number] == sum(inside(allowed, n, built.start) for n in near)
        opposite = [bool(f) and node in neighbours(lattice, n) for f, n in zip(following, near, strict=True)]
        assert built.back[number].tolist() == [int(b) for b in opposite] + [0] * (
            built.next.shape[1] - len(near)
        )
        for f in following:
            if f:
                coming[f].append(number)
    for number, sources in coming.items():
        assert sorted(p for p in built.previous[number].tolist() if p) == sorted(sources)


def half_space(kinds: np.ndarray, cells: np.ndarray) -> np.ndarray:
    return cells[:, -1] >= 0


def holes(kinds: np.ndarray, cells: np.ndarray) -> np.ndarray:
    return (cells.sum(axis=1) * 7 + kinds * 3) % 5 != 0  # leaves out the start too, which is kept


@pytest.mark.parametrize("name", catalogue.names())
@pytest.mark.parametrize("allowed", [None, half_space, holes])
def test_built_in_lattices(name: str, allowed: Allowed | None) -> None:
    """On each built-in lattice, from each site, in each region, the arrays hold what a plain search finds."""
    lattice = catalogue.find(name)
    for start in range(len(lattice.sites)):
        check_patch(patch.build(lattice, start, 5 if lattice.dimension < 4 else 2, allowed), allowed)


@settings(max_examples=150, deadline=None)
@given(small_lattices(), st.integers(0, 5), st.sampled_from([None, half_space, holes]))
def test_random_lattices(lattice: Lattice, radius: int, allowed: Allowed | None) -> None:
    """The same on any lattice, one-way and not."""
    check_patch(patch.build(lattice, len(lattice.sites) - 1, radius, allowed), allowed)


def test_types_and_shapes() -> None:
    """The arrays have the types and shapes that kernels are compiled for."""
    built = patch.build(catalogue.find("dice"), 0, 3)
    rows = built.sites + 1
    assert (built.next.dtype, built.next.shape) == (np.int32, (rows, 6))
    assert (built.previous.dtype, built.previous.shape) == (np.int32, (rows, 6))
    assert (built.back.dtype, built.back.shape) == (np.uint8, (rows, 6))
    assert (built.kind.dtype, built.kind.shape) == (np.int16, (rows,))
    assert (built.free.dtype, built.free.shape) == (np.int16, (rows,))
    assert (built.depth.dtype, built.depth.shape) == (np.int32, (rows,))
    assert (built.cells.dtype, built.cells.shape) == (np.int32, (rows, 2))
    assert all(x.flags.c_contiguous for x in (built.next, built.previous, built.back, built.cells))


def test_a_region_of_the_start_alone() -> None:
    """A start that is walled in has a patch of one site without a way out."""
    built = patch.build(catalogue.find("square"), 0, 9, lambda kinds, cells: np.zeros(len(kinds), dtype=bool))
    assert built.sites == 1
    assert built.next[1].tolist() == [0] * 4
    assert built.free[1] == 0


@settings(max_examples=60, deadline=None)
@given(small_lattices(), st.integers(1, 4))
def test_distances(lattice: Lattice, radius: int) -> None:
    """Distances to targets are those of a search from every site by itself."""
    built = patch.build(lattice, 0, radius)
    targets = {1, built.sites, (built.sites + 1) // 2}
    distance = patch.distance_to(built, sorted(targets))
    assert (distance == patch.distance_to(built, np.isin(np.arange(built.sites + 1), list(targets)))).all()
    assert distance.dtype == np.int32 and distance[0] == FAR
    for site in range(1, min(built.sites, 60) + 1):
        reached, steps = {site}, 0
        front = {site}
        while front and not front & targets:
            front = {int(n) for f in front for n in built.next[f] if n} - reached
            reached |= front
            steps += 1
        assert distance[site] == (steps if front else FAR)


def test_no_target() -> None:
    """Without a target, or with the wall as one, everything is far."""
    built = patch.build(catalogue.find("square"), 0, 2)
    assert (patch.distance_to(built, []) == FAR).all()
    assert (patch.distance_to(built, [0]) == FAR).all()


@pytest.mark.parametrize(
    ("name", "radius"),
    [
        ("square", 400),
        ("manhattan", 400),
        ("kagome", 300),
        ("bcc", 45),
        ("hypercubic5", 12),
        ("ladder", 20000),
    ],
)
def test_sites_needed(name: str, radius: int) -> None:
    """The forecast of the size is within one per cent, far beyond the shells it looks at."""
    lattice = catalogue.find(name)
    built = patch.build(lattice, 0, radius)
    assert patch.sites_needed(lattice, 0, radius) == pytest.approx(built.sites, rel=0.01)


def test_sites_needed_in_regions() -> None:
    """In a slab the forecast grows as in the plane, in a box it ends."""
    cubic = catalogue.find("cubic")

    def slab(kinds: np.ndarray, cells: np.ndarray) -> np.ndarray:
        return (cells[:, 2] >= 0) & (cells[:, 2] <= 4)

    def box(kinds: np.ndarray, cells: np.ndarray) -> np.ndarray:
        return (abs(cells) <= 3).all(axis=1)

    assert patch.sites_needed(cubic, 0, 200, slab) == pytest.approx(
        patch.build(cubic, 0, 200, slab).sites, rel=0.05
    )
    assert patch.sites_needed(cubic, 0, 10**6, box) == 7**3
    assert patch.build(cubic, 0, 10**6, box).sites == 7**3


def test_small_sizes_are_exact() -> None:
    """While the patch is small the forecast is its size."""
    lattice = catalogue.find("dice")
    for radius in range(12):
        for start in range(3):
            assert patch.sites_needed(lattice, start, radius) == patch.build(lattice, start, radius).sites


@pytest.mark.parametrize("radius", [60, 10**6, 10**40])
def test_too_large(radius: int) -> None:
    """A patch that does not fit is refused at once, saying how much it would need and how much there is."""
    with pytest.raises(InputError) as caught:
        patch.build(catalogue.find("hypercubic5"), 0, radius, limit=4_000_000_000)
    line = str(caught.value)
    assert line.startswith(f"hypercubic5: the patch of radius {radius} needs about ")
    assert ("45.5 GB of memory" if radius == 60 else "a million GB or more of memory") in line
    assert "at most 4 GB can be used" in line


def test_memory_held_is_within_the_forecast() -> None:
    """The arrays take less than the bytes that are forecast for building them."""
    for name in ("square", "dice", "prism", "hypercubic4"):
        built = patch.build(catalogue.find(name), 0, 8)
        assert built.nbytes < patch.bytes_needed(built.lattice, built.sites) < 5 * built.nbytes


def test_bad_arguments() -> None:
    """A site that is none, and a negative radius, give one clear line."""
    square = catalogue.find("square")
    with pytest.raises(InputError, match="no site number 1"):
        patch.build(square, 1, 3)
    with pytest.raises(InputError, match="radius -1"):
        patch.build(square, 0, -1)


def test_far_cells_that_fit_in_no_integer() -> None:
    """A lattice whose arcs jump far is refused where its cells would leave 64 bits, and not before."""
    text = 'name = "jumps"\ndimension = 5\n'
    text += f"metric = {np.eye(5, dtype=int).tolist()}\n"
    text += '[[sites]]\nname = "a"\nat = [0, 0, 0, 0, 0]\n'
    for axis in range(5):
        for size in (1, 64):
            cell = [size * int(i == axis) for i in range(5)]
            text += f'[[edges]]\nfrom = "a"\nto = "a"\ncell = {cell}\n'
    lattice = definition.parse(text, "jumps.toml")
    check_patch(patch.build(lattice, 0, 2), None)
    with pytest.raises(InputError, match="do not fit in 64 bits"):
        Keys(lattice, 60)
    assert Keys.that_fit(lattice, 60).radius < 60
