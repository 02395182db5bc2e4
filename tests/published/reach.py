"""What is reproduced of each published table, how far, and what is not yet, with the reason."""

from __future__ import annotations

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

_REGION = "needs a region"
_MOMENT = "needs moments"
_END = "needs the distribution of ends"

WAITING: dict[str, str] = {
    "walks-square-trapped": "needs the number of free neighbours at the end as a statistic",
    "trails-square": "needs trails",
    "trails-triangular": "needs trails",
    "trails-cubic": "needs trails",
    "trails-manhattan": "needs trails",
    "contacts-square-0": "needs contacts",
    "contacts-square-1": "needs contacts",
    "contacts-square-2": "needs contacts",
    "contacts-square-total": "needs contacts",
    "contacts-triangular-0": "needs contacts",
    "contacts-hypercubic5-0": "needs contacts",
    "bridges-square": "needs bridges",
    "bridges-cubic": "needs bridges",
    "halfspace-cubic-visits": "needs visits",
    "end-square-1-1": _END,
    "end-square-2-0": _END,
    "end-triangular-2-0": _END,
    **dict.fromkeys(
        ("quadrant-square", "halfspace-cubic", "quarterspace-cubic", "octant-cubic", "quadrant-king"), _REGION
    ),
    **dict.fromkeys(("quadrant-polygons-square", "well2-square", "well4-square", "well6-square"), _REGION),
    **dict.fromkeys((f"box{width}-square" for width in (2, 4, 6, 8, 10)), _REGION),
    **dict.fromkeys((f"box{width}-cubic" for width in (2, 4, 6)), _REGION),
    **dict.fromkeys((f"r2-{name}" for name in ("square", "cubic", "triangular", "honeycomb")), _MOMENT),
    **dict.fromkeys((f"r2-{name}" for name in ("bcc", "fcc", "manhattan")), _MOMENT),
    **dict.fromkeys((f"rg-{name}" for name in ("square", "triangular")), _MOMENT),
    **dict.fromkeys((f"md-{name}" for name in ("square", "cubic", "triangular", "honeycomb")), _MOMENT),
}
"""Tables that nothing can reproduce yet, and what is missing."""
