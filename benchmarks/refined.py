"""Core time of the direct method over core time of a plain C program, for the same refined counts on one core.

    python benchmarks/refined.py [--repeats 5] [--n 20]

Walks of the square lattice by contacts, with end2, and with end2 and gyration2. Runs take turns; times are core
time, the median over the repeats; compilation is apart. Both sides must give the same numbers. What each side does is
told in benchmarks/README.md.
"""

from __future__ import annotations

import argparse
import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path
from statistics import median
from typing import NamedTuple

from fleetcount.lattice import catalogue
from fleetcount.methods import registry
from fleetcount.methods.direct.method import Endless
from fleetcount.series.defining import define
from fleetcount.series.tally import Tally

SOURCE = Path(__file__).with_name("refined_twin.c")


class Case(NamedTuple):
    """What is counted, and the ratio that is aimed at."""

    title: str
    moments: list[str]
    aim: float


CASES = (
    Case("contacts", [], 1.0),
    Case("contacts, end2", ["end2"], 1.1),
    Case("contacts, end2, gyration2", ["end2", "gyration2"], 1.2),
)

Rows = dict[int, tuple[int, ...]]


class Run(NamedTuple):
    """One run: the sums by contacts, and seconds of core time."""

    rows: Rows
    seconds: float


def main() -> int:
    parser = argparse.ArgumentParser(description="direct method over C program: ratio of core times")
    parser.add_argument("--repeats", type=int, default=5)
    parser.add_argument("--n", type=int, default=20)
    options = parser.parse_args()
    if hasattr(os, "sched_setaffinity"):
        os.sched_setaffinity(0, {max(os.sched_getaffinity(0))})
    with tempfile.TemporaryDirectory() as folder:
        return max(_measure(case, options.n, options.repeats, Path(folder)) for case in CASES)


def _measure(case: Case, n: int, repeats: int, folder: Path) -> int:
    program = folder / f"twin{len(case.moments)}"
    flags = ["-O3", "-march=native", f"-DMOMENTS={len(case.moments)}"]
    subprocess.run(["gcc", *flags, str(SOURCE), "-o", str(program)], check=True)
    _ours(case, 6)  # compiles the kernel
    ours, theirs = [], []
    for _ in range(repeats):
        theirs.append(_theirs(case, program, n))
        ours.append(_ours(case, n))
    if any(run.rows != ours[0].rows for run in [*ours, *theirs]):
        print(f"{case.title}, n={n}: the numbers differ", file=sys.stderr)
        return 1
    mine, twin = (median(run.seconds for run in runs) for runs in (ours, theirs))
    print(f"square walk, {case.title}, n={n}, median of {repeats}, aim: ratio at most {case.aim}")
    print(f"  direct method {mine:6.3f} s, C {twin:6.3f} s, ratio {mine / twin:5.2f}", flush=True)
    return 0


def _theirs(case: Case, program: Path, n: int) -> Run:
    answer = subprocess.run([program, str(n)], check=True, capture_output=True, text=True).stdout.splitlines()
    rows = [tuple(map(int, line.split())) for line in answer[1:]]
    return Run({row[0]: row[1 : 2 + len(case.moments)] for row in rows}, float(answer[0].split()[1]))


def _ours(case: Case, n: int) -> Run:
    """Count all lengths to n from the single root unit, in this process."""
    method = registry.get("direct")
    series = define(catalogue.find("square"), "walk", by=["contacts"], moment=case.moments)
    lengths = range(n + 1)
    (root,) = method.roots(series, lengths)
    before = time.process_time()
    counted = method.count(series, lengths, root.key, Endless())
    sums = Tally(series.width)
    sums.add(counted.explored, root.factor)
    table = method.assemble(series, sums)
    rows = {place[1]: tuple(values) for place, values in table.rows.items() if place[0] == n}
    return Run(rows, time.process_time() - before)


if __name__ == "__main__":
    sys.exit(main())
