"""Facts about this machine and its processes. Imports on every system; asks nothing at import."""

from __future__ import annotations

import getpass
import os
import platform
import socket
import stat
import tempfile
from functools import cache
from pathlib import Path

from fleetcount.errors import FleetcountError

NETWORK_FILESYSTEMS = frozenset({
    "9p", "afs", "afpfs", "beegfs", "ceph", "cifs", "davfs", "fhgfs", "gfs", "gfs2", "glusterfs", "gpfs",
    "lustre", "ncpfs", "nfs", "nfs4", "ocfs2", "orangefs", "panfs", "prl_fs", "pvfs2", "smb2", "smb3",
    "smbfs", "vboxsf", "virtiofs", "webdav",
})  # fmt: skip
"""Types of file systems whose locks or shared memory do not reach every machine that sees the file."""


def machine_name() -> str:
    """The name under which this machine is known: FLEETCOUNT_MACHINE, or its host name."""
    return os.environ.get("FLEETCOUNT_MACHINE") or socket.gethostname() or "unnamed"


@cache
def processor() -> str:
    """The model of the processor, as well as it can be found out."""
    try:
        for line in Path("/proc/cpuinfo").read_text(encoding="utf-8", errors="replace").splitlines():
            if line.lower().startswith(("model name", "hardware")):
                return " ".join(line.partition(":")[2].split())
    except OSError:
        pass
    return platform.processor() or platform.machine() or "unknown"


def cores() -> int:
    """Cores that this process may use: affinity and, on Linux, the processor quota of its control group."""
    number = len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
    return max(1, min(number, _quota() or number))


def _quota() -> int | None:
    """Whole cores that the control group grants, rounded up; None if it sets no limit."""
    try:
        quota, period = Path("/sys/fs/cgroup/cpu.max").read_text(encoding="ascii").split()
        return -(-int(quota) // int(period))
    except (OSError, ValueError):
        return None


@cache
def boot_id() -> str:
    """Identity of the run of this machine, and of the space of process ids, that this process lives in.

    Containers share the boot of their machine but see different processes under the same ids.
    """
    import psutil

    try:
        boot = Path("/proc/sys/kernel/random/boot_id").read_text(encoding="ascii").strip()
        return f"{boot} {Path('/proc/self/ns/pid').readlink()}"
    except OSError:
        return f"boot at {round(psutil.boot_time())}"


def this_process() -> tuple[int, int]:
    """Process id and start of this process."""
    pid = os.getpid()
    return pid, process_start(pid) or 0


def process_start(pid: int) -> int | None:
    """When a process started, in a unit that is only good for comparing; None if it is gone.

    On Linux in clock ticks since the boot, which setting the clock does not change; elsewhere milliseconds.
    """
    import psutil

    try:
        fields = (
            Path(f"/proc/{pid}/stat").read_text(encoding="ascii", errors="replace").rpartition(")")[2].split()
        )
        return None if fields[0] in "ZX" else int(fields[19])
    except (OSError, ValueError, IndexError):
        pass
    try:
        process = psutil.Process(pid)
        return None if process.status() == psutil.STATUS_ZOMBIE else round(process.create_time() * 1000)
    except (psutil.Error, ValueError, OverflowError):
        return None


def is_gone(pid: int, started: int) -> bool:
    """Whether the process with this id and start runs no more. One that may not be looked at is there."""
    import psutil

    now = process_start(pid)
    if now is not None:
        return now != started
    try:
        if os.name == "posix":
            os.kill(pid, 0)  # psutil looks into /proc, which may hide the processes of others
        return not psutil.pid_exists(pid) or psutil.Process(pid).status() == psutil.STATUS_ZOMBIE
    except (psutil.NoSuchProcess, ProcessLookupError, OverflowError, ValueError):
        return True
    except (psutil.Error, PermissionError):
        return False


def on_network_filesystem(path: Path) -> bool:
    """Whether a path, or the nearest folder above it that exists, lies on a network file system."""
    import psutil

    path = path.absolute()
    while not path.exists() and path != path.parent:
        path = path.parent
    path = path.resolve()
    if path.drive.startswith("\\\\"):
        return True
    mounts = {Path(part.mountpoint): part.fstype.lower() for part in psutil.disk_partitions(all=True)}
    for folder in (path, *path.parents):
        if folder in mounts:
            kind = mounts[folder]
            return (
                kind in NETWORK_FILESYSTEMS
                or kind == "fuse.sshfs"
                or kind.startswith(("fuse.gluster", "fuse.ceph"))
            )
    return False


def cache_directory() -> Path:
    """The folder for what can be computed again: FLEETCOUNT_CACHE, or the user's cache folder if it is local,
    or else a folder of the user's own in the local temporary directory. It exists afterwards."""
    import platformdirs

    named = os.environ.get("FLEETCOUNT_CACHE")
    folder = Path(named) if named else platformdirs.user_cache_path("fleetcount", appauthor=False)
    try:
        if named or not on_network_filesystem(folder):
            folder.mkdir(parents=True, exist_ok=True)
            if named or os.access(folder, os.W_OK):
                return folder
    except OSError as error:
        if named:
            raise FleetcountError(
                f"the cache folder cannot be made ({error.strerror})",
                where=named,
                mend="set FLEETCOUNT_CACHE",
            ) from None
    return _own_temporary_folder()


def _own_temporary_folder() -> Path:
    """A folder that nobody else can have put there with something in it."""
    name = str(os.getuid()) if hasattr(os, "getuid") else getpass.getuser()
    folder = Path(tempfile.gettempdir()) / f"fleetcount-{name}"
    mend = "remove it, or set FLEETCOUNT_CACHE to a folder of your own"
    try:
        folder.mkdir(mode=0o700, exist_ok=True)
        found = folder.lstat()
    except OSError as error:
        raise FleetcountError(
            f"the cache folder cannot be made ({error.strerror})", where=str(folder), mend=mend
        ) from None
    ours = not hasattr(os, "getuid") or (found.st_uid == os.getuid() and not found.st_mode & 0o022)
    if not (stat.S_ISDIR(found.st_mode) and ours):
        raise FleetcountError("the cache folder belongs to somebody else", where=str(folder), mend=mend)
    return folder
