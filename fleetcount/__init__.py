"""Exact counts of lattice walks and polygons, by a fleet, into a ledger that can be audited."""

from fleetcount.api import count
from fleetcount.errors import FleetcountError

__version__ = "0.1.0"

__all__ = ["FleetcountError", "count"]
