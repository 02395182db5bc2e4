"""Core time of a plain C program over core time of the direct method, for the same coefficient on one core.

    python benchmarks/kernel.py [--repeats 5] [--lattice square|cubic]

Runs take turns: the C program as one recursive function (`plain`), the same with its last levels written out
(`unrolled`), the direct method. Times are core time, the median over the repeats; compilation is apart. What
each side does is told in benchmarks/README.md.
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

SOURCE = Path(__file__).with_name("kernel_twin.c")
FORMS = {"plain": 0, "unrolled": 1}


class Case(NamedTuple):
    """A coefficient, and the ratio that is aimed at."""

    lattice: str
    dimension: int
    n: int
    aim: float


CASES = (Case("square", 2, 22, 2.2), Case("cubic", 3, 15, 12.0))


class Run(NamedTuple):
    """One run: the coefficient, seconds of core time, and of the C program walks enumerated a second."""

    count: int
    seconds: float
    rate: float = 0.0


def main() -> int:
    parser = argparse.ArgumentParser(description="C program over direct method: ratio of core times")
    parser.add_argument("--repeats", type=int, default=5)
    parser.add_argument("--lattice", choices=[case.lattice for case in CASES])
    options = parser.parse_args()
    if hasattr(os, "sched_setaffinity"):
        os.sched_setaffinity(0, {max(os.sched_getaffinity(0))})
    with tempfile.TemporaryDirectory() as folder:
        return max(
            _measure(case, options.repeats, Path(folder))
            for case in CASES
            if options.lattice in (None, case.lattice)
        )


def _measure(case: Case, repeats: int, folder: Path) -> int:
    programs = {form: _compile(case.dimension, unrolled, folder) for form, unrolled in FORMS.items()}
    _ours(case, 8)  # compiles the kernels
    runs: dict[str, list[Run]] = {form: [] for form in (*FORMS, "direct")}
    for _ in range(repeats):
        for form, program in programs.items():
            runs[form].append(_theirs(program, case.n))
        runs["direct"].append(_ours(case, case.n))
    counts = {run.count for form in runs for run in runs[form]}
    if len(counts) != 1:
        print(f"{case.lattice} n={case.n}: the counts differ: {sorted(counts)}", file=sys.stderr)
        return 1
    ours = median(run.seconds for run in runs["direct"])
    print(f"{case.lattice} n={case.n}: {counts.pop()} walks, median of {repeats}, aim: ratio {case.aim}")
    print(f"  direct method  {ours:7.3f} s")
    for form in FORMS:
        theirs = median(run.seconds for run in runs[form])
        rate = median(run.rate for run in runs[form]) / 1e6
        print(
            f"  C {form:<12} {theirs:7.3f} s, ratio {theirs / ours:5.2f}, {rate:5.0f} million walks a second"
        )
    return 0


def _compile(dimension: int, unrolled: int, folder: Path) -> Path:
    program = folder / f"twin{dimension}{unrolled}"
    flags = ["-O3", "-march=native", f"-DDIMENSION={dimension}", f"-DUNROLLED={unrolled}"]
    subprocess.run(["gcc", *flags, str(SOURCE), "-o", str(program)], check=True)
    return program


def _theirs(program: Path, n: int) -> Run:
    answer = subprocess.run([program, str(n)], check=True, capture_output=True, text=True).stdout.split()
    return Run(int(answer[1]), float(answer[2]), float(answer[3]))


def _ours(case: Case, n: int) -> Run:
    """Count all lengths to n from the single root unit, in this process."""
    method = registry.get("direct")
    series = define(catalogue.find(case.lattice), "walk")
    lengths = range(n + 1)
    (root,) = method.roots(series, lengths)
    before = time.process_time()
    counted = method.count(series, lengths, root.key, Endless())
    sums = Tally()
    sums.add(counted.explored, root.factor)
    counts = method.assemble(series, sums).counts()
    return Run(counts[n], time.process_time() - before)


if __name__ == "__main__":
    sys.exit(main())
