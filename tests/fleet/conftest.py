"""Command lines carried out in this process, as the tests of the command line have them."""

from tests.cli.conftest import fleetcount

__all__ = ["fleetcount"]
