"""The built-in lattices: that each is what its name says, and that its digest never drifts."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import pytest

from fleetcount.errors import InputError
from fleetcount.lattice import catalogue, patch
from fleetcount.lattice.model import Lattice
from fleetcount.series import canonical

# name: dimension, periods, sites a cell, arms out of each site in order. Common practice, no source.
SHAPES = {
    "3.12.12": (2, 2, 6, (3, 3, 3, 3, 3, 3)),
    "4.8.8": (2, 2, 4, (3, 3, 3, 3)),
    "bcc": (3, 3, 1, (8,)),
    "cubic": (3, 3, 1, (6,)),
    "diamond": (3, 3, 2, (4, 4)),
    "dice": (2, 2, 3, (6, 3, 3)),
    "fcc": (3, 3, 1, (12,)),
    "honeycomb": (2, 2, 2, (3, 3)),
    "hypercubic4": (4, 4, 1, (8,)),
    "hypercubic5": (5, 5, 1, (10,)),
    "kagome": (2, 2, 3, (4, 4, 4)),
    "king": (2, 2, 1, (8,)),
    "l-lattice": (2, 2, 2, (2, 2)),
    "ladder": (2, 1, 2, (3, 3)),
    "manhattan": (2, 2, 4, (2, 2, 2, 2)),
    "prism": (3, 1, 3, (4, 4, 4)),
    "square": (2, 2, 1, (4,)),
    "triangular": (2, 2, 1, (6,)),
}

# Numbers of sites at 0, 1, 2, ... steps from a site. The lattices of dimension 3 and more: J. H. Conway and
# N. J. A. Sloane, Low-dimensional lattices VII: coordination sequences, Proc. R. Soc. A 453 (1997) 2369; the
# tilings: C. Goodman-Strauss and N. J. A. Sloane, A coloring-book approach to finding coordination
# sequences, Acta Cryst. A 75 (2019) 121. The values are written down from memory.
SHELLS = {
    "square": [1, 4, 8, 12, 16, 20],
    "triangular": [1, 6, 12, 18, 24, 30],
    "honeycomb": [1, 3, 6, 9, 12, 15],
    "kagome": [1, 4, 8, 14, 18, 22, 28, 30, 38, 38, 48],
    "4.8.8": [1, 3, 5, 8, 11, 13, 16, 19, 21, 24],
    "3.12.12": [1, 3, 4, 6, 8, 12, 14, 15, 18, 21, 22, 24],
    "king": [1, 8, 16, 24, 32, 40],
    "cubic": [1, 6, 18, 38, 66, 102],
    "bcc": [1, 8, 26, 56, 98, 152],
    "fcc": [1, 12, 42, 92, 162, 252],
    "diamond": [1, 4, 12, 24, 42, 64, 92],
    "hypercubic4": [1, 8, 32, 88, 192],
    "hypercubic5": [1, 10, 50, 170, 450],
    "ladder": [1, 3, 4, 4, 4],
    "prism": [1, 4, 6, 6, 6],
}

DIGESTS = {
    "3.12.12": "95307faa91a38c8ece2b843a7ed752bd01b1bebaf6f872f5612292f66742ec0f",
    "4.8.8": "e50cf14070409b4bb180c6999ba65e3f49e0d9976709e3eff4e22700312e5148",
    "bcc": "97f4d7e87635bad4dffc2d98f27dbbf74cd4e787ce85e162c6fe11fc215de037",
    "cubic": "80fa31b2672fe69e58406f6b61d2c92d8f472f66db138b0ecb0124fe78e2bea8",
    "diamond": "200856c71bbfd8d3b2dd4d865895cd2fde76943448114c7ea5ed6df01d243959",
    "dice": "d07684f75fc1e79b54758c14e4566c7c8dcbe8be9bdb4cf6e9849080e53d689d",
    "fcc": "0f52eb4ee2ecf1a836c5fcac74117ffda4885e5e94f45db1587e6478ef4ac931",
    "honeycomb": "e766126341731927bb40546de7af56e0c6a780719ff78b7ff120c90a98417003",
    "hypercubic4": "d3a8285d5380691b38ec773980956627243e6d67d616d96a556a8f7ab26d98a1",
    "hypercubic5": "110281bfb1388b9beed3493936a54113fbf42b33df9bfce24d6958debec90d1c",
    "kagome": "0620cf2e5cb1fe23cb97f23aaf213c4b401b861e8cfc21bc4965f1e524824599",
    "king": "2f8940a38ed931cac98899edb42861f9608c37d21a8ea6c137821f5f26b78b01",
    "l-lattice": "cf47445455c59d0b7c5e91507e4e36d9506d6ad214f2e9ca24cc83e4bdbf4e7d",
    "ladder": "9f6606678b1d838e57fed10167f5aac1f220d91eca4f18e27a1905bb1bcdda8f",
    "manhattan": "f50e0fc0b71cdb838136e128c71e328f69702731adb2910690a2bbedb2addd0f",
    "prism": "7d89d7846e4850891d816385db5725ad7ec664e9f63839f5e86e530994572377",
    "square": "a0acb052dff21e932892e5eff6a6ce799ad761217dedd6152564cb3b623451f4",
    "triangular": "f03f3199d658c8cdaac910db6d0430c547ea00fbc40a2c7ce19cb85316795b84",
}


def squared_length(lattice: Lattice, vector: tuple[int, ...]) -> Fraction:
    terms = (
        a * g * b
        for a, row in zip(vector, lattice.gram, strict=True)
        for g, b in zip(row, vector, strict=True)
    )
    return Fraction(sum(terms), lattice.metric_scale * lattice.scale**2)


def test_names() -> None:
    """The catalogue holds these lattices and no others."""
    assert set(catalogue.names()) == set(SHAPES)


@pytest.mark.parametrize("name", SHAPES)
def test_shapes(name: str) -> None:
    """Each has its dimension, sites and arms, the name of its file, a primitive cell, and comments."""
    lattice = catalogue.find(name)
    assert (lattice.dimension, lattice.periods, len(lattice.sites)) == SHAPES[name][:3]
    assert tuple(len(arms) for arms in lattice.arms) == SHAPES[name][3]
    assert tuple(len(arms) for arms in lattice.arms_in) == SHAPES[name][3]
    assert lattice.name == name and lattice.title and not lattice.warnings
    assert lattice.one_way == (name in ("manhattan", "l-lattice"))
    assert lattice.metric_is == ("drawing" if name in ("4.8.8", "3.12.12") else "exact")


@pytest.mark.parametrize("name", sorted(set(SHAPES) - {"4.8.8", "3.12.12"}))
def test_nearest_neighbours(name: str) -> None:
    """All steps have the customary length, 1 but for bcc and diamond (3, squared), fcc (2) and the king."""
    lattice = catalogue.find(name)
    lengths = {squared_length(lattice, lattice.step(arc)) for arc in lattice.arcs}
    assert lengths == {"bcc": {3}, "diamond": {3}, "fcc": {2}, "king": {1, 2}}.get(name, {1})


@pytest.mark.parametrize("name", SHELLS)
def test_coordination_sequences(name: str) -> None:
    """From every site the shells have the published sizes."""
    lattice = catalogue.find(name)
    radius = len(SHELLS[name]) - 1
    for start in range(len(lattice.sites)):
        depth = patch.build(lattice, start, radius).depth[1:]
        assert [int((depth == n).sum()) for n in range(radius + 1)] == SHELLS[name]


def in_plane(lattice: Lattice, basis: tuple[tuple[int, int], tuple[int, int]]) -> set[tuple[object, ...]]:
    """Places and steps of the arcs out of the sites of one cell, in right-angled coordinates."""

    def plane(vector: tuple[int, ...]) -> tuple[Fraction, ...]:
        return tuple(
            sum((Fraction(x * b[i], lattice.scale) for x, b in zip(vector, basis, strict=True)), Fraction(0))
            for i in (0, 1)
        )

    return {(plane(lattice.positions[arc.source]), plane(lattice.step(arc))) for arc in lattice.arcs}


def test_manhattan_streets() -> None:
    """At (x, y) one goes right if y is even, else left, and up if x is even, else down."""
    expected = set()
    for x in (0, 1):
        for y in (0, 1):
            expected.add(((x, y), (1 if y == 0 else -1, 0)))
            expected.add(((x, y), (0, 1 if x == 0 else -1)))
    assert in_plane(catalogue.find("manhattan"), ((2, 0), (0, 2))) == expected


def test_each_step_turns_on_the_l_lattice() -> None:
    """Ways out are horizontal where x + y is even, else vertical, and each leads to the other kind."""
    expected = {((0, 0), (1, 0)), ((0, 0), (-1, 0)), ((1, 0), (0, 1)), ((1, 0), (0, -1))}
    lattice = catalogue.find("l-lattice")
    assert in_plane(lattice, ((1, 1), (1, -1))) == expected
    assert all(arc.source != arc.target for arc in lattice.arcs)


@pytest.mark.parametrize("name", SHAPES)
def test_digests(name: str) -> None:
    """The canonical form never changes by accident: ledgers and certificates name it."""
    assert canonical.digest(canonical.text(catalogue.find(name).canonical())) == DIGESTS[name]


def test_find_takes_a_path(tmp_path: Path) -> None:
    """Anything with a separator, or ending in .toml, is the path of a file, and equal to the built-in one."""
    path = tmp_path / "mine.toml"
    path.write_text((Path(catalogue.__file__).parent / "catalog" / "square.toml").read_text())
    assert catalogue.find(str(path)) == catalogue.find(path) == catalogue.find("square")


@pytest.mark.parametrize(
    ("name", "mend"),
    [
        ("squar", "did you mean square?"),
        ("Kagome", "did you mean kagome?"),
        ("hexagonal", "did you mean honeycomb or triangular?"),
        ("488", "4.8.8"),
        ("qqqq", "known are 3.12.12, 4.8.8, bcc"),
        ("", "known are"),
        ("x" * 5000, "known are"),
    ],
)
def test_unknown_names(name: str, mend: str) -> None:
    """An unknown name gives one line with near names, or all."""
    with pytest.raises(InputError) as caught:
        catalogue.find(name)
    assert mend in str(caught.value)
    assert "\n" not in str(caught.value) and len(str(caught.value)) < 400


def test_the_file_next_door_is_pointed_at(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A name for which there is a file in the folder says how to name the file."""
    monkeypatch.chdir(tmp_path)
    Path("mine.toml").touch()
    with pytest.raises(InputError, match=r"write \./mine\.toml"):
        catalogue.find("mine")
