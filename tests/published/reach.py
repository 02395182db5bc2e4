"""What is reproduced of each published table, how far, and what is not, with the reason."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

PLAIN: dict[str, tuple[int, int]] = {
    "walks-square": (20, 23),
    "walks-triangular": (14, 15),
    "walks-honeycomb": (22, 22),
    "walks-cubic": (14, 17),
    "walks-bcc": (12, 14),
    "walks-fcc": (10, 12),
    "walks-hypercubic5": (11, 12),
    "walks-manhattan": (25, 25),
    "walks-king": (11, 11),
    "walks-triangular-prism": (19, 19),
    "ladder-square": (31, 36),
    "polygons-square": (24, 28),
    "polygons-triangular": (16, 19),
    "polygons-honeycomb": (36, 40),
    "polygons-cubic": (16, 18),
    "polygons-fcc": (10, 12),
    "closed-walks-bcc": (12, 14),
    "polygons-manhattan": (40, 44),
}
"""Tables of plain counts on built-in lattices: greatest length in the ordinary run, and in the long one.

About a second each, or ten terms; behind the marker `long` about ten seconds each.
"""

OWN_LATTICE: dict[str, int] = {
    "strip3-square-edge": 20,
    "strip3-square-middle": 20,
    "tube1-cubic": 13,
    "tube2-cubic": 13,
    "tube3-cubic": 13,
    "tube4-cubic": 13,
    "two-layer-slab-cubic": 14,
}
"""Strips, tubes and slabs that are lattices of their own, described by a file as a user would write it."""

SUMMED: dict[str, str] = {
    "walks-square-by-turns": "walks-square",
    "walks-cubic-by-turns": "walks-cubic",
    "contacts-square-table": "walks-square",
    "contacts-triangular-table": "walks-triangular",
    "contacts-honeycomb-table": "walks-honeycomb",
    "contacts-bcc-table": "walks-bcc",
}
"""Tables by a statistic, and the table of plain counts that they give when it is summed out."""

CLOSING: dict[str, tuple[str, int]] = {
    "end-square-1-0": ("polygons-square", 4),
    "end-triangular-1-0": ("polygons-triangular", 6),
    "end-fcc-neighbour": ("polygons-fcc", 12),
}
"""Walks that end beside their start, the polygons that one more step makes of them, and the number of
neighbours.
"""


@dataclass(frozen=True)
class Question:
    """One count that several tables speak about.

    Attributes:
        ordinary, long: greatest length in the ordinary run, and in the long one.
        tables: ids of the tables that have to agree.
        options: as `fleetcount.count` takes them.
        walls: form and least value of walls that only a series file can name.
    """

    lattice: str
    object: str
    ordinary: int
    long: int
    tables: tuple[str, ...]
    options: Mapping[str, Any] = field(default_factory=dict)
    walls: tuple[tuple[tuple[int, ...], int], ...] = ()

    def name(self) -> str:
        """The tables, for a list of tests."""
        return " ".join(self.tables)


def _asked(lattice: str, kind: str, ordinary: int, long: int, *tables: str, **options: Any) -> Question:
    return Question(lattice, kind, ordinary, long, tables, options)


_CONTACTS = tuple(f"contacts-square-{name}" for name in ("0", "1", "2", "total", "table"))
_MEASURES = ("end2", "gyration2", "monomer2")


def _well(width: int) -> Question:
    walls = (((1, 0), -width // 2), ((-1, 0), -width // 2), ((0, 1), 0))
    return Question("square", "walk", 16, 16, (f"well{width}-square",), walls=walls)


REFINED: tuple[Question, ...] = (
    _asked(
        "square", "walk", 17, 20, *_CONTACTS, "walks-square-by-turns", "r2-square", "rg-square", "md-square",
        by=["contacts", "turns"], moment=_MEASURES,
    ),
    _asked(
        "triangular", "walk", 10, 12, "contacts-triangular-table", "contacts-triangular-0",
        "r2-triangular", "rg-triangular", "md-triangular", by="contacts", moment=_MEASURES,
    ),
    _asked(
        "cubic", "walk", 11, 13, "walks-cubic-by-turns", "r2-cubic", "md-cubic",
        by="turns", moment=["end2", "monomer2"],
    ),
    _asked(
        "honeycomb", "walk", 20, 24, "contacts-honeycomb-table", "r2-honeycomb", "md-honeycomb",
        by="contacts", moment=["end2", "monomer2"],
    ),
    _asked("bcc", "walk", 8, 8, "contacts-bcc-table", "r2-bcc", by="contacts", moment="end2"),
    _asked("fcc", "walk", 7, 8, "end-fcc-neighbour", "r2-fcc", by="end", moment="end2"),
    _asked("manhattan", "walk", 26, 26, "r2-manhattan", moment="end2"),
    _asked("square", "trail", 18, 18, "trails-square"),
    _asked("triangular", "trail", 11, 12, "trails-triangular"),
    _asked("cubic", "trail", 10, 10, "trails-cubic"),
    _asked("manhattan", "trail", 28, 28, "trails-manhattan"),
    _asked("square", "trapped", 18, 22, "walks-square-trapped"),
    _asked("square", "neighbour-avoiding", 21, 21, "contacts-square-0"),
    _asked("hypercubic5", "neighbour-avoiding", 8, 10, "contacts-hypercubic5-0"),
    _asked("square", "bridge", 12, 12, "bridges-square"),
    _asked("cubic", "bridge", 8, 8, "bridges-cubic"),
    _asked("square", "walk", 21, 25, "end-square-1-0", end="1,0"),
    _asked("square", "walk", 20, 24, "end-square-1-1", end="1,1"),
    _asked("square", "walk", 20, 24, "end-square-2-0", end="2,0"),
    _asked("triangular", "walk", 13, 15, "end-triangular-1-0", end="1,0"),
    _asked("triangular", "walk", 13, 15, "end-triangular-2-0", end="2,0"),
    _asked("square", "walk", 19, 21, "quadrant-square", region="orthant"),
    _asked(
        "cubic", "walk", 9, 11, "halfspace-cubic", "halfspace-cubic-visits",
        by=["visits", "steps:0,0,1"], region="half",
    ),
    _asked("cubic", "walk", 11, 12, "halfspace-cubic", region="half"),
    _asked("cubic", "walk", 12, 13, "quarterspace-cubic", region="quarter"),
    _asked("cubic", "walk", 12, 14, "octant-cubic", region="orthant"),
    _asked(
        "cubic", "walk", 13, 14, "two-layer-slab-cubic", by=["visits", "steps:0,0,1"], region="slab:1"
    ),
    _asked("square", "walk", 26, 30, "ladder-square", region="slab:1"),
    _asked("square", "walk", 20, 20, "strip3-square-edge", region="slab:2"),
    _asked("square", "walk", 20, 20, "strip3-square-middle", region="slab:2", start="0,1"),
    *(_well(width) for width in (2, 4, 6)),
    *(
        _asked("square", "walk", 16, 16, f"box{w}-square", region=f"box:{w},{w}", start=f"{w // 2},0")
        for w in (2, 4, 6, 8, 10)
    ),
    *(_asked("cubic", "walk", 12, 13, f"tube{w}-cubic", region=f"tube:{w},{w}") for w in (1, 2, 3, 4)),
    *(
        _asked("cubic", "walk", 12, 13, f"box{w}-cubic", region=f"box:{w},{w},{w}", start=f"0,0,{w // 2}")
        for w in (2, 4, 6)
    ),
    _asked("square", "polygon", 24, 28, "quadrant-polygons-square", region="orthant"),
    _asked("king", "walk", 9, 11, "quadrant-king", region="orthant"),
)  # fmt: skip
"""Tables that speak about other objects, statistics, moments, regions and ends. Ones that fit are counted at once,
which takes fewer kernels."""

NOT_REACHED: dict[str, str] = {}
"""Tables that nothing can reproduce, and why."""
