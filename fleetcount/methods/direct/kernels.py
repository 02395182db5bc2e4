"""The compiled inner loops of the direct method. They see integer arrays only, never a Python object.

All loops share one way of working. The stack of the depth-first search lies in arrays (`path`, `arm`,
`state`, `weight`), its registers in `reg`, so a kernel can return after any node and be called again.

    reg[DEPTH]  steps of the prefix the search stands on, which is marked as visited
    reg[FLOOR]  the search returns once it would climb above this depth
    reg[TOP]    greatest length to count
    reg[NODES]  nodes visited since it was last cleared

`images[state, kind, arm]` is the number of images of a step under the symmetries that keep the prefix (0 where
another arm stands for this one) and `onward[state, kind, arm]` the state after it; state 0 is: no symmetry left.

Overflow: a node adds at most arms * arms * arms * weight to any sum, where weight never exceeds the order of the
symmetry group. `slices.SLICE_NODES` bounds the nodes of a call, and `search.check_bound` proves with these three
numbers that no sum reaches 2**63.
"""

from __future__ import annotations

from collections.abc import Callable

from numba import njit, uint32

DEPTH, FLOOR, TOP, NODES = range(4)
REGISTERS = 4

VISITED = 16384
"""Taken off `free[site]` while the site is visited, so that one look tells both; more than any coordination number."""


def walk_kernel(arms: int, one_way: bool, levels: int) -> Callable[..., bool]:
    """Counts self-avoiding walks; returns whether the subtree above the floor is exhausted.

    `nxt` and `prv` are uint32 [sites + 1, arms], the sites that each leads to and comes from, zeros anywhere.
    `free[site]` is the number of free neighbours a site leads to. The prefix at depth TOP - 1 - levels is the deepest
    that is marked; all walks beyond are added up from `free` without visiting them.

    Two levels, any lattice: below the marked w, a free neighbour x has free[x] steps, and each free neighbour y of x
    has free[y], less one if y leads back to x, which is not marked.

    Three levels, undirected lattices without triangles: below the marked w a free neighbour v is not marked either. Of
    its free neighbours x each has free[x] - 1 steps, v being left out, and from there free[y] - 1 for each free
    neighbour y. Only v itself is one y too many, free[v] - 1 for each of its free[v] neighbours x; and no other y is
    next to v, for that would be a triangle.
    """

    @njit(nogil=True, cache=True)
    def run(  # type: ignore[no-untyped-def]
        nxt, prv, back, kind, images, onward, free, path, arm, state, weight, sums, reg, limit
    ):
        depth = reg[DEPTH]
        floor = reg[FLOOR]
        last = reg[TOP] - 1 - levels
        nodes = 0
        while nodes < limit:
            here = path[depth]
            a = arm[depth]
            if a == arms:
                if depth == floor:
                    reg[DEPTH] = depth
                    reg[NODES] += nodes
                    return True
                free[here] += VISITED
                for j in range(arms):
                    free[prv[here, uint32(j)]] += 1
                depth -= 1
                continue
            arm[depth] = a + 1
            there = nxt[here, a]
            if free[there] < 0:
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
            depth += 1
            sums[depth + 1] += factor * free[there]
            for j in range(arms):
                free[prv[there, uint32(j)]] -= 1
            free[there] -= VISITED
            if depth < last:
                path[depth] = there
                arm[depth] = 0
                state[depth] = now
                weight[depth] = factor
                continue
            one = 0
            two = 0
            three = 0
            for i in range(arms):
                v = nxt[there, uint32(i)]
                f = free[v]
                if f < 0:
                    continue
                nodes += 1
                one += f
                if f == 0:
                    continue
                if levels == 2:
                    for k in range(arms):
                        two += max(free[nxt[v, uint32(k)]] - (back[v, uint32(k)] if one_way else 1), 0)
                    continue
                nodes += f
                for k in range(arms):
                    x = nxt[v, uint32(k)]
                    g = free[x]
                    if g > 0:
                        two += g - 1
                        for m in range(arms):
                            three += max(free[nxt[x, uint32(m)]] - 1, 0)
                three -= f * (f - 1)
            sums[depth + 2] += factor * one
            sums[depth + 3] += factor * two
            if levels == 3:
                sums[depth + 4] += factor * three
            free[there] += VISITED
            for j in range(arms):
                free[prv[there, uint32(j)]] += 1
            depth -= 1
        reg[DEPTH] = depth
        reg[NODES] += nodes
        return False

    return run


def polygon_kernel(arms: int) -> Callable[..., bool]:
    """Counts self-avoiding returns to the start; returns whether the subtree above the floor is exhausted.

    `home[site]` is the least number of steps in which a site comes back to the start, however visited the way may
    be; `VISITED` is added while the site itself is visited, so that one comparison tells whether a step is possible
    and can still come home in time.
    """

    @njit(nogil=True, cache=True)
    def run(  # type: ignore[no-untyped-def]
        nxt, kind, images, onward, home, path, arm, state, weight, sums, reg, limit
    ):
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
                home[here] -= VISITED
                depth -= 1
                continue
            arm[depth] = a + 1
            there = nxt[here, a]
            back = home[there]
            if depth + 1 + back > top:
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
            if back == 1:
                sums[depth + 2] += factor
            if depth + 3 < top:
                depth += 1
                home[there] += VISITED
                path[depth] = there
                arm[depth] = 0
                state[depth] = now
                weight[depth] = factor
            elif depth + 3 == top:
                two = 0
                for i in range(arms):
                    if home[nxt[there, uint32(i)]] == 1:
                        two += 1
                nodes += two
                sums[top] += factor * two
        reg[DEPTH] = depth
        reg[NODES] += nodes
        return False

    return run
