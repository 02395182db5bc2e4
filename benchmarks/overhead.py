"""What is lost beside counting: start-up, and the share of core time that is not spent inside kernels.

    python benchmarks/overhead.py [--to 26] [--cores 2] [--ledger URL]

Counts the walks of the square lattice into a ledger in a temporary folder, with the kernels in the cache already,
and prints

- seconds from the start of this process to the first unit counted (in the short reading), to the first hand-out of
  the long one, and to its first unit counted, split into its stages;
- time inside kernels over cores times wall time, from the first hand-out of the long reading to its end;
- time inside kernels over the core time that all our processes used meanwhile, which other load does not change;
- seconds that `fleetcount count square walk --to 16` takes in all.
"""

from __future__ import annotations

import argparse
import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import psutil


class Watch:
    """An observer that notes when things happen and what core time has been used."""

    def __init__(self) -> None:
        self.began = psutil.Process().create_time()
        self.times: dict[str, float] = {}
        self.core: dict[str, float] = {}

    def note(self, text: str) -> None:
        print("note:", text)

    def stage(self, text: str) -> None:
        self._mark(text.split(",")[0])

    def terms(self, table: object) -> None:
        self._mark("short reading finished")

    def moment(self, snapshot: object) -> None:
        top, seconds = snapshot.top, snapshot.seconds  # type: ignore[attr-defined]
        self._mark(f"first look at the reading to n={top}")
        if seconds > 0:
            self._mark(f"first unit counted to n={top}")

    def _mark(self, name: str) -> None:
        if name not in self.times:
            self.times[name] = time.time() - self.began
            self.core[name] = core_time()


def core_time() -> float:
    """Core seconds that this process and its children, those that have ended too, have used."""
    own = psutil.Process()
    return sum(sum(p.cpu_times()[:4]) for p in [own, *own.children(recursive=True)])


def main() -> None:
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--to", type=int, default=26)
    parser.add_argument("--cores", type=int, default=2)
    parser.add_argument("--ledger")
    options = parser.parse_args()
    program = str(Path(sys.executable).with_name("fleetcount"))
    with tempfile.TemporaryDirectory() as folder:
        warm = [program, "count", "square", "walk", "--to", "16", "--quiet", "--ledger"]
        subprocess.run([*warm, f"{folder}/warm.sqlite"], check=True, stdout=subprocess.DEVNULL)
        began = time.perf_counter()
        subprocess.run([*warm, f"{folder}/16.sqlite"], check=True, stdout=subprocess.DEVNULL)
        print(f"count square walk --to 16, warm: {time.perf_counter() - began:.2f} s in all (at most 4)")
        child = [sys.executable, __file__, "--to", str(options.to), "--cores", str(options.cores)]
        ledger = options.ledger or f"{folder}/ledger.sqlite"
        subprocess.run(
            [*child, "--ledger", ledger], check=True, env={**os.environ, "FLEETCOUNT_BENCHMARK": "1"}
        )


def long_reading() -> None:
    parser = argparse.ArgumentParser()
    parser.add_argument("--to", type=int)
    parser.add_argument("--cores", type=int)
    parser.add_argument("--ledger")
    options = parser.parse_args()
    from fleetcount.fleet.counting import Options, count_series
    from fleetcount.lattice.catalogue import find
    from fleetcount.ledger import tables
    from fleetcount.ledger.access import open_store
    from fleetcount.series.defining import define

    watch = Watch()
    watch._mark("command line and imports so far")
    series = define(find("square"), "walk")
    with open_store(options.ledger, create=True) as store:
        count_series(store, series, options.to, Options(cores=options.cores, observer=watch))
        ended, used = time.time() - watch.began, core_time()
        reading = tables.finished(store, series.digest)[0]
        census = store.census(reading.reading)
    for name, at in watch.times.items():
        print(f"  {at:7.2f} s  {name}")
    first = f"first look at the reading to n={options.to}"
    wall = ended - watch.times[first]
    core = used - watch.core[first]
    print(f"wall time of the long reading {wall:.2f} s, of which kernels {census.seconds:.2f} core seconds")
    share = census.seconds / (wall * options.cores)
    print(f"kernels / (cores x wall):      {share:.3f} (at least 0.95 on an idle machine)")
    print(f"kernels / core time of ours:   {census.seconds / core:.3f} (at least 0.95)")
    print(
        f"units {census.units}, nodes {census.nodes}, nodes a second a core {census.nodes / census.seconds:.3g}"
    )


if __name__ == "__main__":
    long_reading() if os.environ.get("FLEETCOUNT_BENCHMARK") else main()
