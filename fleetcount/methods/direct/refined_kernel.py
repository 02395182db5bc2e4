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

from numba import njit, uint32

from fleetcount.methods.direct.kernels import DEPTH, FLOOR, NODES, TOP

ADDED, CONTACTS, TURNED, AT_END, SPANNED, REVISITED, AREA = range(7)
SITES, EDGES, NEIGHBOURS = range(3)
ANYWHERE, TRAPPED, ON_TOP, AT_TARGET = range(4)
START = 1
FAR = 1 << 30


class Traits(NamedTuple):
    """What a kernel is compiled for.

    Attributes:
        arms: columns of the table of neighbours.
        adjacent: columns of the table of adjacent sites; 0 where nobody asks for them.
        avoids, ends: rules of the object.
        closed: objects come back to the start.
        one_way: of the lattice.
        sorts: the sort of each statistic, at most two.
        squares: moments that are values of the end.
        monomers, pairs: whether monomer2 and gyration2 are summed.
        dimension: coordinates of a position.
    """

    arms: int
    adjacent: int
    avoids: int
    ends: int
    closed: int
    one_way: int
    sorts: tuple[int, ...]
    squares: int
    monomers: int
    pairs: int
    dimension: int


def refined_kernel(
    arms: int,
    adjacent: int,
    avoids: int,
    ends: int,
    closed: int,
    one_way: int,
    sorts: tuple[int, ...],
    squares: int,
    monomers: int,
    pairs: int,
    dimension: int,
) -> Callable[..., bool]:
    """Counts refined sums; returns whether the subtree above the floor is exhausted.

    Tables (read only): `nxt` uint32 [sites + 1, arms]; `beside` uint32 [sites + 1, adjacent], every adjacent site once;
    `edge` uint32 [sites + 1, arms] with `reverse` likewise, numbers of the edges taken there and back, 0 for none;
    `home` int32 [sites + 1] steps to the goal; `gain` int32 [2, sites + 1, arms]; `value` int32 [2, sites + 1]; `way`
    int32 [kinds, arms]; `height`, `open_arms` int32 [sites + 1]; `square` int64 [2, sites + 1],
    moments of the end; `radius` int64 [sites + 1], squared distances; `dual` and `place` int64
    [dimension, sites + 1], positions with and without the metric applied; `unclosed` int32 [2], taken off a statistic
    when an object closes, because the start was counted already.

    Marks: `seen` and `near` int32 [sites + 1], `used` uint8 [edges + 1]. Stack by depth: `level`, `most`, `least` int32
    [depths, 2], `crest`, `last_way` int32, `spread`, `norm` int64, `vector` int64 [depths, dimension].

    `sums` is int64 [lengths, values, values, columns].
    """
    statistics = len(sorts)
    first_sort = sorts[0] if statistics > 0 else -1
    second_sort = sorts[1] if statistics > 1 else -1
    spans = SPANNED in sorts
    turns = TURNED in sorts
    columns = 1 + squares + monomers + pairs

    @njit(nogil=True, cache=True)
    def run(  # type: ignore[no-untyped-def]
        nxt, kind, images, onward, beside, edge, reverse, home, gain, value, way, height, open_arms, square,
        radius, dual, place, unclosed, seen, near, used, level, most, least, crest, last_way, spread, norm, vector,
        path, arm, state, weight, sums, reg, limit,
    ):  # fmt: skip
        depth = reg[DEPTH]
        floor = reg[FLOOR]
        top = reg[TOP]
        nodes = 0
        while nodes < limit:
            here = path[depth]
            a = arm[depth]
            if a == arms:
                if depth == floor:
                    reg[DEPTH] = depth
                    reg[NODES] += nodes
                    return True
                seen[here] -= 1
                if adjacent > 0 and seen[here] == 0:
                    for j in range(adjacent):
                        near[beside[here, uint32(j)]] -= 1
                depth -= 1
                if avoids == EDGES:
                    used[edge[path[depth], arm[depth] - uint32(1)]] = 0
                continue
            arm[depth] = a + 1
            there = nxt[here, a]
            if there == 0:
                continue
            if avoids == EDGES:
                if used[edge[here, a]] != 0:
                    continue
            elif seen[there] != 0:
                continue
            if avoids == NEIGHBOURS and near[there] != 1:
                continue
            n = depth + 1
            if (closed or ends == AT_TARGET) and n + home[there] > top:
                continue
            factor = weight[depth]
            now = state[depth]
            if now != 0:
                times = images[now, kind[here], a]
                if times == 0:
                    continue
                factor *= times
                now = onward[now, kind[here], a]
            nodes += 1

            fresh = 1 if seen[there] == 0 else 0
            joined = 1
            if avoids == EDGES and one_way and used[reverse[here, a]] != 0:
                joined = 0
            turned = 0
            heading = 0
            if turns:
                heading = way[kind[here], a]
                turned = 1 if depth > 0 and heading != last_way[depth] else 0
            s0 = 0
            s1 = 0
            m0 = 0
            l0 = 0
            m1 = 0
            l1 = 0
            if statistics > 0:
                s0 = level[depth, 0]
                if first_sort == ADDED or first_sort == AREA:
                    s0 += gain[0, here, a]
                elif first_sort == CONTACTS:
                    s0 += fresh * near[there] - joined
                elif first_sort == TURNED:
                    s0 += turned
                elif first_sort == REVISITED:
                    s0 += 1 if seen[there] == 1 else 0
                elif first_sort == AT_END:
                    s0 = value[0, there]
                else:
                    m0 = max(most[depth, 0], value[0, there])
                    l0 = min(least[depth, 0], value[0, there])
                    s0 = m0 - l0
            if statistics > 1:
                s1 = level[depth, 1]
                if second_sort == ADDED or second_sort == AREA:
                    s1 += gain[1, here, a]
                elif second_sort == CONTACTS:
                    s1 += fresh * near[there] - joined
                elif second_sort == TURNED:
                    s1 += turned
                elif second_sort == REVISITED:
                    s1 += 1 if seen[there] == 1 else 0
                elif second_sort == AT_END:
                    s1 = value[1, there]
                else:
                    m1 = max(most[depth, 1], value[1, there])
                    l1 = min(least[depth, 1], value[1, there])
                    s1 = m1 - l1

            far = 0
            wide = 0
            if monomers or pairs:
                far = spread[depth] + radius[there]
            if pairs:
                wide = norm[depth] + radius[there]
                for i in range(dimension):
                    wide += 2 * vector[depth, i] * dual[i, there]

            if closed:
                if home[there] == 1 and n < top:
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
                            if first_sort == ADDED or first_sort == AREA:
                                c0 += gain[0, there, uint32(k)] - unclosed[0]
                            elif first_sort == CONTACTS:
                                c0 -= rejoined
                            elif first_sort == TURNED:
                                c0 += bend
                        if statistics > 1:
                            if second_sort == ADDED or second_sort == AREA:
                                c1 += gain[1, there, uint32(k)] - unclosed[1]
                            elif second_sort == CONTACTS:
                                c1 -= rejoined
                            elif second_sort == TURNED:
                                c1 += bend
                        if first_sort == AREA:
                            c0 = abs(c0)
                        if second_sort == AREA:
                            c1 = abs(c1)
                        sums[n + 1, c0, c1, 0] += factor
                        if pairs:
                            sums[n + 1, c0, c1, columns - 1] += factor * ((n + 1) * far - wide)
            else:
                counts = True
                if ends == TRAPPED:
                    ways_on = open_arms[there]
                    for k in range(arms):
                        beyond = nxt[there, uint32(k)]
                        if beyond != 0 and seen[beyond] != 0:
                            ways_on -= 1
                    counts = ways_on == 0
                elif ends == ON_TOP:
                    counts = height[there] >= crest[depth]
                elif ends == AT_TARGET:
                    counts = home[there] == 0
                if counts:
                    sums[n, s0, s1, 0] += factor
                    for q in range(squares):
                        sums[n, s0, s1, 1 + q] += factor * square[q, there]
                    if monomers:
                        sums[n, s0, s1, 1 + squares] += factor * far
                    if pairs:
                        sums[n, s0, s1, columns - 1] += factor * ((n + 1) * far - wide)

            if not closed and ends != AT_TARGET and n == top - 1:
                # The last step: nothing is marked for it, not even the site that it is taken from.
                for k in range(arms):
                    x = nxt[there, uint32(k)]
                    if x == 0:
                        continue
                    if avoids == EDGES:
                        along = edge[there, uint32(k)]
                        if used[along] != 0 or along == edge[here, a]:
                            continue
                    elif seen[x] != 0:
                        continue
                    if avoids == NEIGHBOURS and near[x] != 0:
                        continue
                    last_factor = factor
                    if now != 0:
                        times = images[now, kind[there], uint32(k)]
                        if times == 0:
                            continue
                        last_factor = factor * times
                    nodes += 1
                    c0 = s0
                    c1 = s1
                    pair = 0
                    if adjacent > 0:
                        pair = near[x]
                        if avoids == EDGES:
                            pair = (near[x] + fresh if seen[x] == 0 else 0) - 1
                            if one_way:
                                over = reverse[there, uint32(k)]
                                if over != 0 and (used[over] != 0 or over == edge[here, a]):
                                    pair += 1
                    if statistics > 0:
                        if first_sort == ADDED or first_sort == AREA:
                            c0 += gain[0, there, uint32(k)]
                        elif first_sort == CONTACTS:
                            c0 += pair
                        elif first_sort == TURNED:
                            c0 += 1 if way[kind[there], uint32(k)] != heading else 0
                        elif first_sort == REVISITED:
                            c0 += 1 if seen[x] == 1 else 0
                        elif first_sort == AT_END:
                            c0 = value[0, x]
                        else:
                            c0 = max(m0, value[0, x]) - min(l0, value[0, x])
                    if statistics > 1:
                        if second_sort == ADDED or second_sort == AREA:
                            c1 += gain[1, there, uint32(k)]
                        elif second_sort == CONTACTS:
                            c1 += pair
                        elif second_sort == TURNED:
                            c1 += 1 if way[kind[there], uint32(k)] != heading else 0
                        elif second_sort == REVISITED:
                            c1 += 1 if seen[x] == 1 else 0
                        elif second_sort == AT_END:
                            c1 = value[1, x]
                        else:
                            c1 = max(m1, value[1, x]) - min(l1, value[1, x])
                    if ends == TRAPPED:
                        ways_on = open_arms[x]
                        for j in range(arms):
                            beyond = nxt[x, uint32(j)]
                            if beyond != 0 and (seen[beyond] != 0 or beyond == there):
                                ways_on -= 1
                        if ways_on != 0:
                            continue
                    elif ends == ON_TOP:
                        if height[x] < max(crest[depth], height[there]):
                            continue
                    sums[top, c0, c1, 0] += last_factor
                    for q in range(squares):
                        sums[top, c0, c1, 1 + q] += last_factor * square[q, x]
                    if monomers or pairs:
                        far_out = far + radius[x]
                        if monomers:
                            sums[top, c0, c1, 1 + squares] += last_factor * far_out
                        if pairs:
                            wide_out = wide + radius[x]
                            for i in range(dimension):
                                wide_out += 2 * (vector[depth, i] + place[i, there]) * dual[i, x]
                            sums[top, c0, c1, columns - 1] += last_factor * ((top + 1) * far_out - wide_out)
            elif n < top - closed and not (ends == AT_TARGET and home[there] == 0):
                if avoids == EDGES:
                    used[edge[here, a]] = 1
                seen[there] += 1
                if adjacent > 0 and fresh:
                    for j in range(adjacent):
                        near[beside[there, uint32(j)]] += 1
                path[n] = there
                arm[n] = 0
                state[n] = now
                weight[n] = factor
                if turns:
                    last_way[n] = heading
                if statistics > 0:
                    level[n, 0] = s0
                if statistics > 1:
                    level[n, 1] = s1
                if spans:
                    most[n, 0] = m0
                    least[n, 0] = l0
                    most[n, 1] = m1
                    least[n, 1] = l1
                if ends == ON_TOP:
                    crest[n] = max(crest[depth], height[there])
                if monomers or pairs:
                    spread[n] = far
                if pairs:
                    norm[n] = wide
                    for i in range(dimension):
                        vector[n, i] = vector[depth, i] + place[i, there]
                depth = n
        reg[DEPTH] = depth
        reg[NODES] += nodes
        return False

    return run
