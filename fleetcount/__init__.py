"""Exact counts of lattice walks and polygons, by a fleet, into a ledger that can be audited."""

__version__ = "0.1.0"
