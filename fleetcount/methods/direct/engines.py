"""Which compiled search counts a series: the plain kernels where they can, else the refined one."""

from __future__ import annotations

from fleetcount.methods.direct import ground as plain
from fleetcount.methods.direct import refined_ground as refined
from fleetcount.methods.direct.keys import Prefix
from fleetcount.methods.direct.refined_search import RefinedSearch
from fleetcount.methods.direct.search import Search
from fleetcount.series.definition import Series


def kernel_of(series: Series) -> tuple[str, tuple[object, ...]]:
    """Name and traits of the kernel that counts a series."""
    return plain.kernel_of(series) if series.plain else ("refined", tuple(refined.traits_of(series)))


def load(series: Series) -> None:
    """Compile that kernel, or load it from the cache."""
    if series.plain:
        plain.load(series)
    else:
        refined.load(series)


def search_of(series: Series, prefix: Prefix, top: int) -> Search | RefinedSearch | None:
    """A search below a prefix; None where too few steps are left for the kernel."""
    if not series.plain:
        if len(prefix.arms) >= top:
            return None
        root = prefix._replace(arms=prefix.arms[:1]) if prefix.least else prefix.root()
        return RefinedSearch(refined.refined_ground(series, root, top), prefix.arms)
    base = plain.ground(series, prefix.root(), top)
    return Search(base, prefix.arms) if Search.reaches(base, len(prefix.arms)) else None
