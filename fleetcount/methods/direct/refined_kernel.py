"""The compiled loop for everything beyond plain counts: other objects, statistics, moments.

It works as the loops in `kernels` do, on the same stack and registers, and visits every configuration but marks only
those that are gone on from: the last step is counted without marking it. What is to be counted is fixed when the
kernel is compiled, so what is not asked for costs nothing.

A statistic has a value at each depth, `level[depth, q]`. How a step changes it depends on its sort:

    ADDED      by gain[q, site, arm]: visits, steps along a direction, area
    CONTACTS   by the visited neighbours of a new site, less the pair that the step itself joins
    TURNED     by one where the step's way differs from the last one's
    AT_END     it is value[q, site] of the last site: height, end
    SPANNED    greatest less least value[q, site]
    REVISITED  by one where a site is passed for the second time

Overflow: `refined_search.bound` chooses the nodes of a slice so that no sum can reach 2**63.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

from numba import int64, njit, uint32, uint64

from fleetcount.methods.direct.kernels import DEPTH, FLOOR, NODES, TOP

ADDED, CONTACTS, TURNED, AT_END, SPANNED, REVISITED, AREA = range(7)
SITES, EDGES, NEIGHBOURS = range(3)
ANYWHERE, TRAPPED, ON_TOP, AT_TARGET = range(4)
START = 1
FAR = 1 << 30
VISITED = 1 << 20
"""Added to `near[site]` while the site is visited, so that one look tells both: more than any number of neighbours."""


class Traits(NamedTuple):
    """What a kernel is compiled for.

    Attributes:
        arms: columns of the table of neighbours.
        adjacent: columns of the table of adjacent sites; 0 where nobody asks for them.
        avoids, ends: rules of the object.
        closed: objects come back to the start.
        one_way: of the lattice.
        sorts: the sort of each statistic, at most two.
        distances, heights, monomers, pairs: whether squared distances and heights of the end, monomer2 and gyration2
            are summed.
        dimension: coordinates of a position.
    """

    arms: int
    adjacent: int
    avoids: int
    ends: int
    closed: int
    one_way: int
    sorts: tuple[int, ...]
    distances: int
    heights: int
    monomers: int
    pairs: int
    dimension: int


@njit(forceinline=True, nogil=True)
def _after(sort, q, before, gain, value, here, a, there, pairs, turned, again):  # type: ignore[no-untyped-def]
    """A statistic's value after the step from `here` by arm `a` to `there`; spans apart."""
    if sort == ADDED or sort == AREA:
        return before + gain[q, here, a]
    if sort == CONTACTS:
        return before + pairs
    if sort == TURNED:
        return before + turned
    if sort == REVISITED:
        return before + again
    return value[q, there]


@njit(forceinline=True, nogil=True)
def _add(sums, n, cell, times, distances, distance, heights, height, monomers, far, pairs, apart):  # type: ignore[no-untyped-def]
    """Add an object to its cell of the sums, `times` times, with those moments that are asked for."""
    sums[n, uint64(cell)] += times
    if distances:
        sums[n, uint64(cell + 1)] += times * distance
    if heights:
        sums[n, uint64(cell + 1 + distances)] += times * height
    if monomers:
        sums[n, uint64(cell + 1 + distances + heights)] += times * far
    if pairs:
        sums[n, uint64(cell + 1 + distances + heights + monomers)] += times * apart


@njit(forceinline=True, nogil=True)
def _ways_on(nxt, open_arms, marks, least, site, before):  # type: ignore[no-untyped-def]
    """Neighbours of a site to go on to: neither marked with `least` or more nor the unmarked site `before`."""
    ways = open_arms[site]
    for j in range(nxt.shape[1]):
        beyond = nxt[site, uint32(j)]
        if beyond != 0 and (marks[beyond] >= least or beyond == before):
            ways -= 1
    return ways


def refined_kernel(
    arms: int,
    adjacent: int,
    avoids: int,
    ends: int,
    closed: int,
    one_way: int,
    sorts: tuple[int, ...],
    distances: int,
    heights: int,
    monomers: int,
    pairs: int,
    dimension: int,
) -> Callable[..., bool]:
    """Counts refined sums; returns whether the subtree above the floor is exhausted.

    Tables (read only): `nxt` uint32 [sites + 1, arms]; `beside` uint32 [sites + 1, adjacent], every adjacent site once;
    `edge` uint32 [sites + 1, arms] with `reverse` likewise, numbers of the edges taken there and back, 0 for none;
    `home` int32 [sites + 1] steps to the goal; `gain` int32 [2, sites + 1, arms]; `value` int32 [2, sites + 1]; `way`
    int32 [kinds, arms]; `height`, `open_arms` int32 [sites + 1]; `square` int64 [2, sites + 1], squared distances and
    heights from the start; `dual` and `place` int64 [sites + 1, dimension], positions with and without the metric
    applied; `stride` int64 [kinds * arms * dimension], what an arm adds to a position; `unclosed` int32 [2], taken off
    a statistic when an object closes, because the start was counted already.

    Marks: `near` int32 [sites + 1], visited neighbours, `VISITED` more where the site is visited itself; of objects
    that avoid edges the visits stand in `seen` int32 [sites + 1] instead, and `used` uint8 [edges + 1]. Stack by depth:
    `level`, `most`, `least` int32 [depths, 2], `crest`, `last_way` int32, `spread`, `norm` int64, `vector` int64
    [depths, dimension].

    `sums` is int64 [lengths, values * second * columns], `second` being the number of values of the second statistic.
    """
    statistics = len(sorts)
    first_sort = sorts[0] if statistics > 0 else -1
    second_sort = sorts[1] if statistics > 1 else -1
    first_adds, second_adds = first_sort in (ADDED, AREA), second_sort in (ADDED, AREA)
    spans = SPANNED in sorts
    turns = TURNED in sorts
    columns = 1 + distances + heights + monomers + pairs
    measured = distances or monomers or pairs
    last_closed = closed or ends == AT_TARGET

    @njit(nogil=True, cache=True)
    def run(  # type: ignore[no-untyped-def]
        nxt, kind, images, onward, beside, edge, reverse, home, gain, value, way, height, open_arms, square,
        dual, place, stride, unclosed, seen, near, used, level, most, least, crest, last_way, spread, norm,
        vector, path, arm, state, weight, sums, reg, second, limit,
    ):  # fmt: skip
        depth = reg[DEPTH]
        floor = reg[FLOOR]
        top = reg[TOP]
        nodes = 0
        while nodes < limit:
            d = uint64(depth)
            here = path[d]
            begin = arm[d]
            if begin == arms:
                if depth == floor:
                    reg[DEPTH] = depth
                    reg[NODES] += nodes
                    return True
                gone = True
                if avoids == EDGES:
                    seen[here] -= 1
                    gone = seen[here] == 0
                else:
                    near[here] -= VISITED
                if adjacent > 0 and gone:
                    for j in range(adjacent):
                        near[beside[here, uint32(j)]] -= 1
                depth -= 1
                if avoids == EDGES:
                    used[edge[path[uint64(depth)], arm[uint64(depth)] - uint32(1)]] = 0
                continue
            # Below the last site that is marked all arms are taken in one go.
            end = int64(begin) + 1
            if depth == top - 2 and depth != floor and not last_closed:
                end = arms
            arm[d] = end
            n = depth + 1
            e = uint64(n)
            before = state[d]
            carried = weight[d]
            for step in range(int64(begin), end):
                a = uint32(step)
                there = nxt[here, a]
                beside_it = 0
                if avoids == EDGES:
                    if there == 0:
                        continue
                    if used[edge[here, a]] != 0:
                        continue
                    if adjacent > 0:
                        beside_it = near[there]
                else:
                    beside_it = near[there]
                    if beside_it >= VISITED:
                        continue
                if avoids == NEIGHBOURS and beside_it != 1:
                    continue
                if last_closed and n + home[there] > top:
                    continue
                factor = carried
                now = before
                if now != 0:
                    times = images[now, kind[here], a]
                    if times == 0:
                        continue
                    factor *= times
                    now = onward[now, kind[here], a]
                nodes += 1

                fresh = 1
                again = 0
                if avoids == EDGES:
                    fresh = 1 if seen[there] == 0 else 0
                    again = 1 if seen[there] == 1 else 0
                pair = 0
                if adjacent > 0:
                    pair = fresh * beside_it - 1
                    if avoids == EDGES and one_way and used[reverse[here, a]] != 0:
                        pair += 1
                turned = 0
                heading = 0
                if turns:
                    heading = way[kind[here], a]
                    turned = 1 if depth > 0 and heading != last_way[d] else 0
                s0 = 0
                s1 = 0
                m0 = 0
                l0 = 0
                m1 = 0
                l1 = 0
                if first_sort == SPANNED:
                    m0 = max(most[d, 0], value[0, there])
                    l0 = min(least[d, 0], value[0, there])
                    s0 = m0 - l0
                elif statistics > 0:
                    s0 = _after(first_sort, 0, level[d, 0], gain, value, here, a, there, pair, turned, again)
                if second_sort == SPANNED:
                    m1 = max(most[d, 1], value[1, there])
                    l1 = min(least[d, 1], value[1, there])
                    s1 = m1 - l1
                elif statistics > 1:
                    s1 = _after(second_sort, 1, level[d, 1], gain, value, here, a, there, pair, turned, again)

                distance = square[0, there] if measured else 0
                tall = square[1, there] if heights else 0
                far = 0
                wide = 0
                twice = 0
                if monomers or pairs:
                    far = spread[d] + distance
                if pairs:
                    dot = 0
                    for i in range(dimension):
                        dot += vector[d, uint32(i)] * place[there, uint32(i)]
                    twice = 2 * dot
                    wide = norm[d] + distance + twice

                if closed:
                    if home[there] == 1 and n < top and (one_way or n > 1):
                        for k in range(arms):
                            if nxt[there, uint32(k)] != START:
                                continue
                            if avoids == EDGES:
                                back_again = edge[there, uint32(k)]
                                if used[back_again] != 0 or back_again == edge[here, a]:
                                    continue
                            c0 = s0
                            c1 = s1
                            rejoined = 1
                            if one_way and n == 1 and avoids == SITES:
                                rejoined = 0
                            if one_way and avoids == EDGES:
                                over = reverse[there, uint32(k)]
                                if over != 0 and (used[over] != 0 or over == edge[here, a]):
                                    rejoined = 0
                            bend = 0
                            if turns:
                                final = way[kind[there], uint32(k)]
                                first = last_way[1] if depth > 0 else heading
                                bend = (1 if final != heading else 0) + (1 if final != first else 0)
                            if statistics > 0:
                                if first_adds:
                                    c0 += gain[0, there, uint32(k)] - unclosed[0]
                                elif first_sort == CONTACTS:
                                    c0 -= rejoined
                                elif first_sort == TURNED:
                                    c0 += bend
                            if statistics > 1:
                                if second_adds:
                                    c1 += gain[1, there, uint32(k)] - unclosed[1]
                                elif second_sort == CONTACTS:
                                    c1 -= rejoined
                                elif second_sort == TURNED:
                                    c1 += bend
                            if first_sort == AREA:
                                c0 = abs(c0)
                            if second_sort == AREA:
                                c1 = abs(c1)
                            cell = (c0 * second + c1 if statistics > 1 else c0) * columns
                            sums[uint64(n + 1), uint64(cell)] += factor
                            if pairs:
                                sums[uint64(n + 1), uint64(cell + columns - 1)] += factor * (
                                    (n + 1) * far - wide
                                )
                else:
                    counts = True
                    if ends == TRAPPED:
                        counts = _ways_on(nxt, open_arms, near, VISITED, there, 0) == 0
                    elif ends == ON_TOP:
                        counts = height[there] >= crest[d]
                    elif ends == AT_TARGET:
                        counts = home[there] == 0
                    if counts:
                        cell = (s0 * second + s1 if statistics > 1 else s0) * columns
                        apart = (n + 1) * far - wide
                        _add(
                            sums,
                            e,
                            cell,
                            factor,
                            distances,
                            distance,
                            heights,
                            tall,
                            monomers,
                            far,
                            pairs,
                            apart,
                        )

                if not last_closed and n == top - 1:
                    # The last step: nothing is marked for it, not even the site that it is taken from.
                    t = uint64(top)
                    strides = 0
                    apart = 0
                    if pairs:
                        strides = int64(kind[there]) * (arms * dimension)
                        apart = (n + 2) * far - wide - twice - 2 * distance
                        for i in range(dimension):
                            c = uint32(i)
                            vector[e, c] = 2 * (vector[d, c] + dual[there, c])
                    for k in range(arms):
                        b = uint32(k)
                        x = nxt[there, b]
                        if avoids == EDGES:
                            if x == 0:
                                continue
                            along = edge[there, b]
                            if used[along] != 0 or along == edge[here, a]:
                                continue
                        elif near[x] >= VISITED:
                            continue
                        if avoids == NEIGHBOURS and near[x] != 0:
                            continue
                        last_factor = factor
                        if now != 0:
                            times = images[now, kind[there], b]
                            if times == 0:
                                continue
                            last_factor = factor * times
                        nodes += 1
                        pair = 0
                        again = 0
                        if avoids == EDGES:
                            again = 1 if seen[x] == 1 else 0
                        if adjacent > 0:
                            pair = near[x]
                            if avoids == EDGES:
                                pair = (near[x] + fresh if seen[x] == 0 else 0) - 1
                                if one_way:
                                    over = reverse[there, b]
                                    if over != 0 and (used[over] != 0 or over == edge[here, a]):
                                        pair += 1
                        turned = 0
                        if turns:
                            turned = 1 if way[kind[there], b] != heading else 0
                        c0 = 0
                        c1 = 0
                        if first_sort == SPANNED:
                            c0 = max(m0, value[0, x]) - min(l0, value[0, x])
                        elif statistics > 0:
                            c0 = _after(first_sort, 0, s0, gain, value, there, b, x, pair, turned, again)
                        if second_sort == SPANNED:
                            c1 = max(m1, value[1, x]) - min(l1, value[1, x])
                        elif statistics > 1:
                            c1 = _after(second_sort, 1, s1, gain, value, there, b, x, pair, turned, again)
                        if ends == TRAPPED:
                            if _ways_on(nxt, open_arms, near, VISITED, x, there) != 0:
                                continue
                        elif ends == ON_TOP and height[x] < max(crest[d], height[there]):
                            continue
                        cell = (c0 * second + c1 if statistics > 1 else c0) * columns
                        last_distance = square[0, x] if measured else 0
                        last_tall = square[1, x] if heights else 0
                        last_apart = 0
                        if pairs:
                            last_apart = apart + top * last_distance
                            for i in range(dimension):
                                last_apart -= (
                                    vector[e, uint32(i)] * stride[uint64(strides + k * dimension + i)]
                                )
                        _add(
                            sums,
                            t,
                            cell,
                            last_factor,
                            distances,
                            last_distance,
                            heights,
                            last_tall,
                            monomers,
                            far + last_distance,
                            pairs,
                            last_apart,
                        )
                elif n < top - closed and not (ends == AT_TARGET and home[there] == 0):
                    if avoids == EDGES:
                        used[edge[here, a]] = 1
                        seen[there] += 1
                    else:
                        near[there] += VISITED
                    if adjacent > 0 and fresh:
                        for j in range(adjacent):
                            near[beside[there, uint32(j)]] += 1
                    path[e] = there
                    arm[e] = 0
                    state[e] = now
                    weight[e] = factor
                    if turns:
                        last_way[e] = heading
                    if statistics > 0:
                        level[e, 0] = s0
                    if statistics > 1:
                        level[e, 1] = s1
                    if spans:
                        most[e, 0] = m0
                        least[e, 0] = l0
                        most[e, 1] = m1
                        least[e, 1] = l1
                    if ends == ON_TOP:
                        crest[e] = max(crest[d], height[there])
                    if monomers or pairs:
                        spread[e] = far
                    if pairs:
                        norm[e] = wide
                        for i in range(dimension):
                            vector[e, uint32(i)] = vector[d, uint32(i)] + dual[there, uint32(i)]
                    depth = n
        reg[DEPTH] = depth
        reg[NODES] += nodes
        return False

    return run
