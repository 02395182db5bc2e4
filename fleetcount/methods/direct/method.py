"""The direct method behind the face that all methods show."""

from __future__ import annotations

import threading
from collections.abc import Sequence
from functools import cache, lru_cache
from itertools import count as counting
from typing import TYPE_CHECKING

from fleetcount.errors import InputError, TrustError
from fleetcount.methods.direct import keys, rooting, twin
from fleetcount.methods.direct.calibration import Calibration, Calibrator
from fleetcount.methods.direct.end_orbits import unfolded
from fleetcount.methods.direct.kept import kept_symmetries
from fleetcount.methods.direct.pieces import Piece, children, share, state_after, taken_out
from fleetcount.methods.direct.symmetry_states import SymmetryStates, states_of
from fleetcount.methods.face import Child, Clock, Counted, Forecast, Word
from fleetcount.series.definition import Series
from fleetcount.series.tally import Tally

if TYPE_CHECKING:
    from fleetcount.methods.direct.slices import Slices

CLIMB_SHARE = 0.1
"""When time is up, at most this share of the time used is spent on finishing the deepest open subtrees."""

_FIRST_TRIAL = 4
"""The least reach that the kernels can count."""

_calibrating = threading.Lock()


class Endless:
    """A clock that never says anything but go on."""

    def word(self) -> Word:
        return Word.GO


class DirectMethod:
    """Depth-first enumeration of the objects themselves."""

    name = "direct"
    version = 1

    def refuses(self, series: Series) -> str | None:
        """Any lattice and object can be enumerated, if only it has a root."""
        return rooting.refusal(series)

    def check_reach(self, series: Series, top: int) -> None:
        """See `Method.check_reach`; nothing is built."""
        from fleetcount.methods.direct import ground, refined_reach, search  # compiled code is imported late

        roots = self._roots(series, rooting.rootings(series)[0])
        ground.check_reach(series, roots, top)
        if not series.plain:
            refined_reach.check_reach(series, roots, top)
        for root in roots:
            order = len(kept_symmetries(series, root.start))
            search.check_bound(series.lattice.name, ground.width(series.lattice), order)

    def is_warm(self, series: Series) -> bool:
        """See `Method.is_warm`."""
        from fleetcount.methods import compiled  # compiled code is imported late
        from fleetcount.methods.direct.engines import kernel_of

        return compiled.is_warm(self.name, *kernel_of(series))

    def prepare(self, series: Series, lengths: Sequence[int]) -> None:
        """Compile or load the kernel; the tables of a reach are made when they are first needed."""
        from fleetcount.methods.direct.engines import load  # compiled code is imported late

        load(series)

    def roots(self, series: Series, lengths: Sequence[int]) -> tuple[Child, ...]:
        """One unit for each root, weighted by how many sites it stands for."""
        top = max(lengths)
        least = self._rooted_at_least(series, top)
        known, found = _calibrate(series, least), []
        for root in rooting.roots(series, least):
            prefix = keys.Prefix(root.start, least, (), root.cell)
            found.append(Child(prefix.key(), root.weight, max(1.0, known.total(top) * known.parts[prefix])))
        return tuple(sorted(found, key=lambda child: child.key))

    def divide(self, series: Series, lengths: Sequence[int], key: str) -> Counted:
        """The prefix itself is explored, its extensions are the children."""
        top = max(lengths)
        prefix, states = self._understood(series, key, top)
        depth, explored = len(prefix.arms), _passed(series, prefix, top)
        pieces = list(children(series, states, prefix, top)) if depth < top else []
        return Counted(explored, self._as_children(series, top, pieces), 1, 0.0)

    def count(
        self, series: Series, lengths: Sequence[int], key: str, clock: Clock, without: Sequence[str] = ()
    ) -> Counted:
        """Search the unit slice by slice; see `Method.count`."""
        from fleetcount.methods.direct.engines import search_of  # compiled code is imported late

        top = max(lengths)
        prefix, states = self._understood(series, key, top)
        whole, passed = taken_out(series, states, prefix, top, [keys.parse(k) for k in without])
        if not prefix.arms and not without and (prefix.least or not series.plain):
            # The first arm is part of how least-rooted polygons come home; the empty prefix is measured by the twin.
            passed, whole = [Piece(prefix, 1)], list(children(series, states, prefix, top)) if top else []
        explored, nodes, seconds = Tally(series.width), len(passed), 0.0
        for piece in passed:
            explored.add(_passed(series, piece.prefix, top), piece.factor)
        rest: list[Piece] = []
        word = Word.GO
        for place in counting():
            if place == len(whole) or word is not Word.GO:
                rest += whole[place:]
                break
            piece = whole[place]
            search = search_of(series, piece.prefix, top)
            if search is None:
                explored.add(twin.whole(series, piece.prefix, top), piece.factor)
                continue
            word = _run(search, clock)
            for arms, factor in search.rest():
                rest.append(Piece(prefix._replace(arms=arms), piece.factor * factor))
            explored.add(_closed_walks(series, search.tally(), prefix.least), piece.factor)
            nodes, seconds = nodes + search.nodes, seconds + search.seconds
        return Counted(explored, self._as_children(series, top, rest), nodes, seconds)

    def assemble(self, series: Series, sums: Tally, partial: bool = False) -> Tally:
        """Walks: the sums themselves. Polygons: closed walks divided by the ways to run through each.

        Raises:
            TrustError: a remainder, which no correct sum can leave.
        """
        if not series.rule.closed:
            return unfolded(series, sums, partial)
        table = Tally(sums.width)
        for place, values in sums.sorted_rows():
            ways = rooting.ways(series, place[0])
            if not partial and any(value % ways for value in values):
                raise TrustError(f"{values[0]} closed walks of length {place[0]} are no multiple of {ways}")
            table.rows[place] = tuple(value // ways for value in values)
        return table

    def forecast(self, series: Series, lengths: Sequence[int]) -> Forecast:
        """Extrapolated from about a tenth of a second of counting."""
        top = max(lengths)
        known = _calibrate(series, self._rooted_at_least(series, top))
        shares = tuple(known.total(n) for n in range(top + 1))
        return Forecast(shares[-1], shares[-1] / known.rate, 1.5 + 0.02 * max(0, top - known.reach), shares)

    def _roots(self, series: Series, least: bool) -> list[keys.Prefix]:
        return [keys.Prefix(root.start, least, (), root.cell) for root in rooting.roots(series, least)]

    def _rooted_at_least(self, series: Series, top: int) -> bool:
        """Which of the ways to root closed objects visits the fewest nodes at this reach."""
        ways = rooting.rootings(series)
        return (
            ways[0] if len(ways) == 1 else min(ways, key=lambda least: _calibrate(series, least).total(top))
        )

    def _understood(self, series: Series, key: str, top: int) -> tuple[keys.Prefix, SymmetryStates]:
        """The prefix that a key names on this lattice, up to this length, and the symmetry states of its start."""
        prefix = keys.parse(key)
        known = prefix.least in rooting.rootings(series) and prefix.root() in _known_roots(
            series, prefix.least
        )
        path = twin.sites_along(series.lattice, prefix) if known else None
        if path is None or len(prefix.arms) > top:
            raise InputError(f"no unit of {series.title()} up to length {top}", where=key)
        if not twin.begins(series, prefix, path):
            raise InputError("a prefix that the object cannot begin with", where=key)
        states = states_of(series, prefix.start, prefix.least)
        state_after(series, states, prefix)  # raises InputError where another prefix stands for this one
        return prefix, states

    def _as_children(self, series: Series, top: int, pieces: Sequence[Piece]) -> tuple[Child, ...]:
        found = []
        for piece in pieces:
            prefix = piece.prefix
            known = _calibrate(series, prefix.least)
            states = states_of(series, prefix.start, prefix.least)
            part = known.parts.get(prefix.root(), 1.0) * share(series, states, prefix, top)
            found.append(Child(prefix.key(), piece.factor, max(1.0, known.total(top) * part)))
        return tuple(sorted(found, key=lambda child: child.key))


def _passed(series: Series, prefix: keys.Prefix, top: int) -> Tally:
    """What is counted of a prefix when its children are units of their own: itself, or polygons that close next."""
    depth = len(prefix.arms)
    return twin.whole(series, prefix, min(depth + 1, top) if series.rule.closed else depth)


def _closed_walks(series: Series, tally: Tally, least: bool) -> Tally:
    """A polygon that is found once, at its least site, counts for all the closed walks along it."""
    if least:
        each = 1 if series.lattice.one_way else 2
        for place, values in tally.rows.items():
            tally.rows[place] = tuple(value * each * place[0] for value in values)
    return tally


@cache
def _known_roots(series: Series, least: bool) -> frozenset[keys.Prefix]:
    """All roots that a series may have; of fixed ones any site of an orbit."""
    if series.start is None and not series.walls:
        return frozenset(keys.Prefix(site, least, ()) for site in range(len(series.lattice.sites)))
    return frozenset(keys.Prefix(root.start, least, (), root.cell) for root in rooting.roots(series, least))


def _run(search: Slices, clock: Clock) -> Word:
    """Run a search until it is done or the clock says otherwise; returns the clock's last word."""
    while not search.slice():
        word = clock.word()
        if word is Word.STOP_NOW:
            return word
        if word is Word.TIME_UP:
            allowance = search.seconds * (1 + CLIMB_SHARE)
            for _ in search.climb(CLIMB_SHARE / 2):
                if search.seconds > allowance or clock.word() is Word.STOP_NOW:
                    break
            return clock.word()
    return clock.word()


def _calibrate(series: Series, least: bool) -> Calibration:
    with _calibrating:
        return _calibration(series, least)


@lru_cache(maxsize=32)
def _calibration(series: Series, least: bool) -> Calibration:
    """Count to growing reach for a moment, from one start of each kind."""
    method = DirectMethod()
    method.prepare(series, range(_FIRST_TRIAL + 1))  # compiling is no part of the trial
    roots = method._roots(series, least)
    trial = Calibrator(_FIRST_TRIAL)
    for reach in counting(_FIRST_TRIAL):
        got = {root: method.count(series, range(reach + 1), root.key(), Endless()) for root in roots}
        trial.add({root: g.nodes for root, g in got.items()}, sum(g.seconds for g in got.values()))
        if trial.enough():
            return trial.result()
    raise AssertionError("counting never ends")
