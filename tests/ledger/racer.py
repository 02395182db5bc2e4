"""A process that tries to take a lease each time it is told to, and says what it got. Run by test_race.py."""

from __future__ import annotations

import sys

from fleetcount.errors import HeldError
from fleetcount.ledger import leasing
from fleetcount.ledger.access import open_store
from tests.ledger.builders import DIGEST


def main(where: str) -> None:
    leasing.POLL_SECONDS = 0.01
    lease = None
    with open_store(where) as store:
        print("ready", flush=True)
        for line in sys.stdin:
            word = line.strip()
            if word == "take":
                try:
                    lease = store.take(DIGEST, leasing.this_process())
                    print(f"took {lease.token}", flush=True)
                except HeldError as error:
                    lease = None
                    print(f"held {error}", flush=True)
            elif lease is not None and word == "renew":
                store.renew(lease)
                print("renewed", flush=True)
            elif lease is not None and word == "release":
                store.release(lease)
                print("released", flush=True)


if __name__ == "__main__":
    main(sys.argv[1])
