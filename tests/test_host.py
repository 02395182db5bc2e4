"""Facts about this machine and its processes."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from pathlib import Path
from types import SimpleNamespace

import psutil
import pytest

from fleetcount import host
from fleetcount.errors import FleetcountError


def _sleeper() -> subprocess.Popen[bytes]:
    return subprocess.Popen([sys.executable, "-c", "import time; time.sleep(60)"])


def test_a_process_from_start_to_end() -> None:
    """A process is there while it runs, and gone once it has ended, also as a zombie nobody has waited for."""
    child = _sleeper()
    start = host.process_start(child.pid)
    assert start is not None and not host.is_gone(child.pid, start)
    assert host.is_gone(child.pid, start + 1)
    child.kill()
    for _ in range(200):
        if host.is_gone(child.pid, start):
            break
        time.sleep(0.02)
    assert host.is_gone(child.pid, start) and host.process_start(child.pid) is None
    assert psutil.pid_exists(child.pid)
    child.wait()
    assert host.is_gone(child.pid, start)


def test_this_process() -> None:
    """This process is not gone; the id of a boot stays what it is; machine and processor have names."""
    pid, start = host.this_process()
    assert pid == os.getpid() and not host.is_gone(pid, start)
    assert host.boot_id() == host.boot_id() != ""
    assert host.machine_name() and host.processor()


@pytest.mark.parametrize("pid", [2**22 + 1, 2**70])
def test_a_process_that_cannot_be(pid: int) -> None:
    """Process ids that no process has are gone, however large."""
    assert host.process_start(pid) is None and host.is_gone(pid, 1)


def test_a_name_of_its_own(monkeypatch: pytest.MonkeyPatch) -> None:
    """A machine can be given a name."""
    monkeypatch.setenv("FLEETCOUNT_MACHINE", "alder")
    assert host.machine_name() == "alder"


def test_cores(monkeypatch: pytest.MonkeyPatch) -> None:
    """Cores are those that this process may use, at least one, at most what its group is granted."""
    assert 1 <= host.cores() <= (os.cpu_count() or 1)
    monkeypatch.setattr(host, "_quota", lambda: 1)
    assert host.cores() == 1


@pytest.mark.parametrize(
    ("fstype", "network"),
    [
        ("nfs4", True),
        ("CIFS", True),
        ("fuse.sshfs", True),
        ("lustre", True),
        ("ext4", False),
        ("tmpfs", False),
    ],
)
def test_file_systems(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, fstype: str, network: bool) -> None:
    """The nearest mount above a path, also one that is not there yet, decides what it lies on."""
    mounts = [
        SimpleNamespace(mountpoint="/", fstype="xfs"),
        SimpleNamespace(mountpoint=str(tmp_path), fstype=fstype),
    ]
    monkeypatch.setattr(psutil, "disk_partitions", lambda **_: mounts)
    assert host.on_network_filesystem(tmp_path / "not" / "there") is network
    assert host.on_network_filesystem(tmp_path.parent) is False


def test_the_cache_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The cache is where FLEETCOUNT_CACHE says, or the user's cache, or a private local folder if that is remote."""
    monkeypatch.setenv("FLEETCOUNT_CACHE", str(tmp_path / "named"))
    assert host.cache_directory() == tmp_path / "named" and (tmp_path / "named").is_dir()
    monkeypatch.delenv("FLEETCOUNT_CACHE")
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "home"))
    if sys.platform == "linux":
        assert host.cache_directory() == tmp_path / "home" / "fleetcount"
    monkeypatch.setattr(host, "on_network_filesystem", lambda path: True)
    monkeypatch.setattr(host.tempfile, "gettempdir", lambda: str(tmp_path))
    folder = host.cache_directory()
    assert folder.parent == tmp_path and folder.stat().st_mode & 0o777 == 0o700


def test_a_cache_folder_of_somebody_else(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A temporary folder that others can write, or that is a link, is not used: code is loaded from there."""
    monkeypatch.delenv("FLEETCOUNT_CACHE", raising=False)
    monkeypatch.setattr(host, "on_network_filesystem", lambda path: True)
    monkeypatch.setattr(host.tempfile, "gettempdir", lambda: str(tmp_path))
    folder = host.cache_directory()
    folder.chmod(0o777)
    with pytest.raises(FleetcountError, match="belongs to somebody else"):
        host.cache_directory()
    folder.rmdir()
    (tmp_path / "trap").mkdir()
    folder.symlink_to(tmp_path / "trap")
    with pytest.raises(FleetcountError, match="belongs to somebody else"):
        host.cache_directory()


def test_a_cache_folder_that_cannot_be(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A cache folder that cannot be made is told in one line."""
    (tmp_path / "file").touch()
    monkeypatch.setenv("FLEETCOUNT_CACHE", str(tmp_path / "file" / "cache"))
    with pytest.raises(FleetcountError, match="cannot be made"):
        host.cache_directory()


@pytest.mark.skipif(os.name != "posix", reason="signals of POSIX systems")
def test_a_hidden_process_of_another_user_is_not_gone(monkeypatch: pytest.MonkeyPatch) -> None:
    """A process that can neither be looked at nor be signalled, where /proc hides those of others, is there."""

    def kill(pid: int, number: int) -> None:
        raise PermissionError

    monkeypatch.setattr(host, "process_start", lambda pid: None)
    monkeypatch.setattr(psutil, "pid_exists", lambda pid: False)
    assert host.is_gone(os.getpid(), 1)
    monkeypatch.setattr(os, "kill", kill)
    assert not host.is_gone(os.getpid(), 1)
