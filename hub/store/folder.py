"""The data folder: made, on a disk of this machine, and worked on by one hub at a time."""

import fcntl
import os
from pathlib import Path

from hub.errors import AlreadyRunningError, StoreError

# File systems of other machines: their locks are not dependable, and a write-ahead log needs shared memory.
NETWORK_SHARES = frozenset({"nfs", "nfs4", "cifs", "smb3", "smbfs", "fuse.sshfs", "afs", "ceph", "glusterfs"})
MOUNTS = Path("/proc/self/mountinfo")


def make_folder(folder: Path) -> None:
    """Make the folder if it does not exist.

    Raises
    ------
    StoreError
        It cannot be made.
    """
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise StoreError(
            f"The data folder {folder} cannot be made: {error.strerror}. Choose another with --data."
        ) from None


def refuse_network_share(folder: Path, mounts: Path = MOUNTS) -> None:
    """Refuse a folder of another machine.

    Raises
    ------
    StoreError
        The folder lies on a network share.
    """
    kind = _file_system(folder.resolve(), mounts)
    if kind in NETWORK_SHARES:
        raise StoreError(
            f"The folder {folder} lies on a network share ({kind}), where a database does not survive. "
            "Choose a folder on a disk of this machine with --data."
        )


def _file_system(folder: Path, mounts: Path) -> str:
    """The kind of file system a folder lies on, as the kernel lists it (proc(5), mountinfo); empty if not known."""
    try:
        lines = mounts.read_text(errors="replace").splitlines()
    except OSError:
        return ""
    best, kind = -1, ""
    for line in lines:
        before, _, after = line.partition(" - ")
        place, kinds = before.split(" ")[4:5], after.split(" ")[:1]
        if place and kinds:
            point = Path(place[0].replace("\\040", " "))
            # Of two on the same point the later one hides the earlier.
            if folder.is_relative_to(point) and len(point.parts) >= best:
                best, kind = len(point.parts), kinds[0]
    return kind


class FolderLock:
    """The mark that a part of a hub works on a data folder; the system drops it when the process ends, however.

    The part that collects is the one that moves the write-ahead log.
    """

    def __init__(self, data: Path, part: str = "collect") -> None:
        self._path = data / f"{part}.lock"
        self._handle: int | None = None

    def take(self) -> None:
        """Take the lock, or say who has it.

        Raises
        ------
        AlreadyRunningError
            Another process holds it.
        StoreError
            The folder cannot be made, or takes no lock.
        """
        make_folder(self._path.parent)
        try:
            handle = os.open(self._path, os.O_RDWR | os.O_CREAT, 0o600)
        except OSError as error:
            raise StoreError(
                f"The lock {self._path} cannot be written: {error.strerror}. "
                "Make the data folder writable for the hub's user, or choose another with --data."
            ) from None
        try:
            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            owner = os.read(handle, 32).decode(errors="replace").strip()
            os.close(handle)
            raise AlreadyRunningError(
                f"Another hub{f' (process {owner})' if owner else ''} already works on the data folder "
                f"{self._path.parent}. Stop it first, or give this one its own folder with --data."
            ) from None
        except OSError as error:
            os.close(handle)
            raise StoreError(
                f"The data folder {self._path.parent} takes no lock: {error.strerror}. "
                "Choose a folder on a disk of this machine with --data."
            ) from None
        os.ftruncate(handle, 0)
        os.write(handle, f"{os.getpid()}\n".encode())
        self._handle = handle

    def try_take(self) -> bool:
        """Take the lock if nobody has it."""
        try:
            self.take()
        except AlreadyRunningError:
            return False
        return True

    def release(self) -> None:
        """Give the lock back."""
        if self._handle is not None:
            os.close(self._handle)
            self._handle = None
