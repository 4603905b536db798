"""One sweep a bench: a lock that names its owner. Acts (disk)."""

import hashlib
import tempfile
from collections.abc import Callable
from pathlib import Path

from pitchsweep.acquire.acquire_errors import RunRefused
from pitchsweep.acquire.run_lock import RunLock, lock_file
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.fingerprint import canonical_json

NETWORK_KINDS = frozenset(
    "nfs nfs4 cifs smb smb2 smb3 smbfs fuse.sshfs fuse.davfs davfs 9p afs ncpfs "
    "fuse.rclone fuse.glusterfs ceph lustre".split()
)
MOUNTS = Path("/proc/self/mounts")


def take_bench_lock(runs: Path, bench: Bench, say: Callable[[str], None]) -> RunLock:
    """The lock of ``bench``, whoever else on this machine wants it.

    A bench with ports is one bench wherever its runs go; every sweep of a simulated
    one has a twin of its own, so only the same bench with runs in the same folder is
    taken for the same. Raises RunRefused naming the owner while another sweep holds
    it. A lock that a killed sweep left is taken over, and ``say`` is told.
    """
    lock, left_by = lock_file(
        _folder() / f"bench-{_mark(runs, bench)}.lock",
        lambda owner: RunRefused(
            runs,
            f"bench '{bench.bench}' is in use by another sweep: {owner}",
            "wait for it, or stop it with Ctrl-C where it runs",
        ),
    )
    if left_by:
        say(f"a sweep that did not end by itself left bench '{bench.bench}': {left_by}")
    return lock


def _mark(runs: Path, bench: Bench) -> str:
    if bench.ports is not None:
        what = canonical_json(bench.ports)
    else:
        what = f"{runs.resolve()} {canonical_json(bench)}"
    return hashlib.sha256(what.encode("utf-8")).hexdigest()[:16]


def _folder() -> Path:
    """Where locks are: a local folder, for it must honour locking."""
    folder = Path(tempfile.gettempdir()) / "pitchsweep-locks"
    folder.mkdir(mode=0o1777, parents=True, exist_ok=True)
    return folder


def refuse_network_folder(folder: Path, mounts: Path = MOUNTS) -> None:
    """Raises RunRefused where ``folder`` lies on a network disk."""
    found = file_system_of(folder, mounts)
    if found in NETWORK_KINDS:
        raise RunRefused(
            folder,
            f"a network folder ({found}): it may lose a journal at a power cut",
            "keep runs on a local disk: --runs DIR; copy the finished run afterwards",
        )


def file_system_of(folder: Path, mounts: Path = MOUNTS) -> str:
    """The kind of file system under ``folder``; empty where that cannot be told."""
    try:
        lines = mounts.read_text(encoding="utf-8").splitlines()
        place = folder.resolve()
    except (OSError, UnicodeDecodeError):
        return ""
    best, kind = -1, ""
    for line in lines:
        words = line.split(" ")
        if len(words) < 3:
            continue
        at = Path(words[1].replace("\\040", " "))
        if (place == at or at in place.parents) and len(at.parts) >= best:
            best, kind = len(at.parts), words[2]
    return kind
