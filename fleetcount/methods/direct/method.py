"""The direct method behind the face that all methods show."""

from __future__ import annotations

import threading
from collections.abc import Sequence
from functools import lru_cache
from itertools import count as counting
from typing import TYPE_CHECKING

from fleetcount.errors import InputError, TrustError
from fleetcount.lattice.symmetry import site_orbits, stabilizer
from fleetcount.methods.direct import keys, twin
from fleetcount.methods.direct.calibration import Calibration, Calibrator
from fleetcount.methods.direct.pieces import Piece, children, share, state_after, taken_out
from fleetcount.methods.direct.symmetry_states import SymmetryStates, states_of
from fleetcount.methods.face import Child, Clock, Counted, Forecast, Word
from fleetcount.series.definition import Series
from fleetcount.series.tally import Tally

if TYPE_CHECKING:
    from fleetcount.methods.direct.search import Search

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
        """Any lattice and object can be enumerated."""
        return None

    def check_reach(self, series: Series, top: int) -> None:
        """See `Method.check_reach`; nothing is built."""
        from fleetcount.methods.direct import ground, search  # compiled code is imported late

        ground.check_reach(series, self._starts(series), top)
        for start in self._starts(series):
            order = len(stabilizer(series.lattice, start))
            search.check_bound(series.lattice.name, ground.width(series.lattice), order)

    def is_warm(self, series: Series) -> bool:
        """See `Method.is_warm`."""
        from fleetcount.methods import compiled  # compiled code is imported late
        from fleetcount.methods.direct.ground import kernel_of

        return compiled.is_warm(self.name, *kernel_of(series))

    def prepare(self, series: Series, lengths: Sequence[int]) -> None:
        """Make patch, symmetry states and kernels for that reach; says so in one line if the patch is too big."""
        from fleetcount.methods.direct.ground import ground  # compiled code is imported late

        for start in self._starts(series):
            ground(series, start, self._rooted_at_least(series, max(lengths)), max(lengths))

    def roots(self, series: Series, lengths: Sequence[int]) -> tuple[Child, ...]:
        """One unit for each kind of start site, weighted by how many of the cell's sites are of that kind."""
        top = max(lengths)
        least = self._rooted_at_least(series, top)
        starts = dict.fromkeys(range(len(series.lattice.sites)), 1) if least else self._starts(series)
        known = _calibrate(series, least)
        return tuple(
            Child(keys.Prefix(s, least, ()).key(), weight, max(1.0, known.total(top) * known.parts[s]))
            for s, weight in sorted(starts.items())
        )

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
        from fleetcount.methods.direct.ground import ground  # compiled code is imported late
        from fleetcount.methods.direct.search import Search

        top = max(lengths)
        prefix, states = self._understood(series, key, top)
        whole, passed = taken_out(series, states, prefix, top, [keys.parse(k) for k in without])
        if not prefix.arms and prefix.least and not without:
            passed, whole = [Piece(prefix, 1)], list(children(series, states, prefix, top))
        explored, nodes, seconds = Tally(), len(passed), 0.0
        for piece in passed:
            explored.add(_passed(series, piece.prefix, top), piece.factor)
        rest: list[Piece] = []
        word = Word.GO
        for place in counting():
            if place == len(whole) or word is not Word.GO:
                rest += whole[place:]
                break
            piece = whole[place]
            base = ground(series, prefix.start, prefix.least, top)
            if not Search.reaches(base, len(piece.prefix.arms)):
                explored.add(twin.whole(series, piece.prefix, top), piece.factor)
                continue
            search = Search(base, piece.prefix.arms)
            word = _run(search, clock)
            for arms, factor in search.rest():
                rest.append(Piece(prefix._replace(arms=arms), piece.factor * factor))
            explored.add(self._tally(series, search, prefix.least), piece.factor)
            nodes, seconds = nodes + search.nodes, seconds + search.seconds
        return Counted(explored, self._as_children(series, top, rest), nodes, seconds)

    def assemble(self, series: Series, sums: Tally) -> Tally:
        """Walks: the sums themselves. Polygons: closed walks divided by the ways to run through each.

        Raises:
            TrustError: a remainder, which no correct sum can leave.
        """
        if not series.rule.closed:
            return sums
        table = Tally()
        for place, (closed,) in sums.sorted_rows():
            ways = place[0] if series.lattice.one_way else 2 * place[0]
            polygons, remainder = divmod(closed, ways)
            if remainder:
                raise TrustError(f"{closed} closed walks of length {place[0]} are no multiple of {ways}")
            table.rows[place] = (polygons,)
        return table

    def forecast(self, series: Series, lengths: Sequence[int]) -> Forecast:
        """Extrapolated from about a tenth of a second of counting."""
        top = max(lengths)
        known = _calibrate(series, self._rooted_at_least(series, top))
        shares = tuple(known.total(n) for n in range(top + 1))
        return Forecast(shares[-1], shares[-1] / known.rate, 1.5 + 0.02 * max(0, top - known.reach), shares)

    def _starts(self, series: Series) -> dict[int, int]:
        if series.start is not None:
            return {series.start: 1}
        return {orbit[0]: len(orbit) for orbit in site_orbits(series.lattice)}

    def _rooted_at_least(self, series: Series, top: int) -> bool:
        """Which of the two ways to root polygons visits fewer nodes at this reach."""
        if not series.rule.closed:
            return False
        return _calibrate(series, True).total(top) <= _calibrate(series, False).total(top)

    def _understood(self, series: Series, key: str, top: int) -> tuple[keys.Prefix, SymmetryStates]:
        """The prefix that a key names on this lattice, up to this length, and the symmetry states of its start."""
        prefix = keys.parse(key)
        known = prefix.start < len(series.lattice.sites) and (series.rule.closed or not prefix.least)
        path = twin.sites_along(series.lattice, prefix) if known else None
        if path is None or len(prefix.arms) > top:
            raise InputError(f"no unit of {series.title()} up to length {top}", where=key)
        if not twin.allowed(series.lattice, prefix, path):
            raise InputError("a prefix that the object cannot begin with", where=key)
        states = states_of(series.lattice, prefix.start, prefix.least)
        state_after(series, states, prefix)  # raises InputError where another prefix stands for this one
        return prefix, states

    def _tally(self, series: Series, search: Search, least: bool) -> Tally:
        """A search's sums as a tally; a polygon found once, at its least site, counts for all its closed walks."""
        sums = {n: c for n, c in search.sums.items() if n <= search.ground.top}
        if series.rule.closed:
            sums = {n: c for n, c in sums.items() if n >= series.rule.least_length(series.lattice)}
        if least:
            sums = {n: c * (n if series.lattice.one_way else 2 * n) for n, c in sums.items()}
        return Tally.of_counts(sums)

    def _as_children(self, series: Series, top: int, pieces: Sequence[Piece]) -> tuple[Child, ...]:
        found = []
        for piece in pieces:
            prefix = piece.prefix
            known = _calibrate(series, prefix.least)
            states = states_of(series.lattice, prefix.start, prefix.least)
            part = known.parts.get(prefix.start, 1.0) * share(series, states, prefix, top)
            found.append(Child(prefix.key(), piece.factor, max(1.0, known.total(top) * part)))
        return tuple(sorted(found, key=lambda child: child.key))


def _passed(series: Series, prefix: keys.Prefix, top: int) -> Tally:
    """What is counted of a prefix when its children are units of their own: itself, or polygons that close next."""
    depth = len(prefix.arms)
    return twin.whole(series, prefix, min(depth + 1, top) if series.rule.closed else depth)


def _run(search: Search, clock: Clock) -> Word:
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
    from fleetcount.methods.direct.ground import ground  # compiled code is imported late

    method = DirectMethod()
    starts = dict.fromkeys(range(len(series.lattice.sites)), 1) if least else method._starts(series)
    for start in starts:
        ground(series, start, least, _FIRST_TRIAL)  # compiling is no part of the trial
    trial = Calibrator(_FIRST_TRIAL)
    for reach in counting(_FIRST_TRIAL):
        got = {start: _whole(method, series, start, least, reach) for start in starts}
        trial.add({start: g.nodes for start, g in got.items()}, sum(g.seconds for g in got.values()))
        if trial.enough():
            return trial.result()
    raise AssertionError("counting never ends")


def _whole(method: DirectMethod, series: Series, start: int, least: bool, reach: int) -> Counted:
    key = keys.Prefix(start, least, ()).key()
    return method.count(series, range(reach + 1), key, Endless())
