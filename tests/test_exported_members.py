"""What `import fleetcount` gives, and what it costs."""

from __future__ import annotations

import subprocess
import sys
from types import ModuleType

import fleetcount


def test_all_is_what_is_there() -> None:
    """`__all__` is sorted and names exactly the public members of the package."""
    public = {
        name
        for name, member in vars(fleetcount).items()
        if not name.startswith("_") and not isinstance(member, ModuleType)
    }
    assert public - {"annotations"} == set(fleetcount.__all__)
    assert list(fleetcount.__all__) == sorted(fleetcount.__all__)


def test_members_are_documented_and_at_home() -> None:
    """Each member says what it is, and where it belongs."""
    for name in fleetcount.__all__:
        member = getattr(fleetcount, name)
        assert member.__doc__ and member.__module__.startswith("fleetcount."), name


def test_import_is_light() -> None:
    """Importing the package loads none of the libraries that count, store or draw."""
    code = (
        "import sys; from fleetcount import *; import fleetcount\n"
        "assert set(fleetcount.__all__) <= set(globals())\n"
        "heavy = {'numpy', 'numba', 'sqlalchemy', 'alembic', 'dask', 'distributed', 'rich', 'psutil', 'typer'}\n"
        "print(sorted(heavy & set(sys.modules)))\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, timeout=60, check=True
    )
    assert done.stdout == "[]\n"
