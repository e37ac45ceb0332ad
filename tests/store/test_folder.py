import os
import signal
import subprocess
import sys
import time

import pytest

from hub.errors import AlreadyRunningError, StoreError
from hub.store.folder import FolderLock, make_folder, refuse_network_share

HOLDER = """
import sys, time
from pathlib import Path
from hub.store.folder import FolderLock
FolderLock(Path(sys.argv[1]), "collect").take()
print("taken", flush=True)
time.sleep(600)
"""


@pytest.fixture
def holder(tmp_path):
    """A process that holds the lock of a folder."""
    with subprocess.Popen([sys.executable, "-c", HOLDER, str(tmp_path)], stdout=subprocess.PIPE, text=True) as process:
        assert process.stdout.readline() == "taken\n"
        yield process
        process.kill()


def test_a_second_hub_is_refused_with_a_sentence_and_let_in_when_the_first_is_killed(tmp_path, holder):
    with pytest.raises(AlreadyRunningError) as caught:
        FolderLock(tmp_path).take()
    assert str(caught.value) == (
        f"Another hub (process {holder.pid}) already works on the data folder {tmp_path}. "
        "Stop it first, or give this one its own folder with --data."
    )
    assert not FolderLock(tmp_path).try_take()
    holder.send_signal(signal.SIGKILL)
    holder.wait()
    lock = FolderLock(tmp_path)
    lock.take()
    assert (tmp_path / "collect.lock").read_text() == f"{os.getpid()}\n"
    lock.release()


def test_each_part_has_its_lock_and_each_folder_its_own(tmp_path, holder):
    for lock in (FolderLock(tmp_path, "web"), FolderLock(tmp_path / "other", "collect")):
        assert lock.try_take()
        lock.release()


def test_a_lock_that_was_given_back_can_be_taken_and_giving_back_twice_is_harmless(tmp_path):
    first, second = FolderLock(tmp_path), FolderLock(tmp_path)
    first.take()
    assert not second.try_take()
    first.release()
    first.release()
    assert second.try_take()
    second.release()


def test_a_child_process_does_not_keep_the_lock(tmp_path):
    lock = FolderLock(tmp_path)
    lock.take()
    with subprocess.Popen([sys.executable, "-c", "import time; time.sleep(600)"]) as process:
        time.sleep(0.2)
        lock.release()
        other = FolderLock(tmp_path)
        assert other.try_take()
        other.release()
        process.kill()


def test_a_lock_that_cannot_be_written(tmp_path):
    (tmp_path / "collect.lock").mkdir()
    with pytest.raises(StoreError, match=r"cannot be written: Is a directory. Make the data folder writable"):
        FolderLock(tmp_path).take()


def test_a_folder_that_takes_no_lock(tmp_path, monkeypatch):
    def unsupported(_handle, _kind):
        raise OSError(37, "No locks available")

    monkeypatch.setattr("hub.store.folder.fcntl.flock", unsupported)
    with pytest.raises(StoreError, match=r"takes no lock: No locks available. Choose a folder"):
        FolderLock(tmp_path).take()


def test_a_folder_is_made_with_its_parents(tmp_path):
    make_folder(tmp_path / "a" / "b")
    make_folder(tmp_path / "a" / "b")
    assert (tmp_path / "a" / "b").is_dir()
    (tmp_path / "file").write_text("")
    with pytest.raises(StoreError, match=r"The data folder .* cannot be made: .*. Choose another with --data."):
        make_folder(tmp_path / "file" / "b")
    with pytest.raises(StoreError, match="cannot be made: File exists"):
        make_folder(tmp_path / "file")


# Lines as proc(5) describes /proc/PID/mountinfo.
MOUNTS = r"""
22 1 8:1 / / rw,relatime shared:1 - ext4 /dev/sda1 rw
30 22 0:25 / /srv rw,relatime shared:2 master:1 - nfs4 server:/srv rw
31 30 8:2 / /srv/local rw - ext4 /dev/sdb1 rw
32 22 0:26 / /media/my\040share rw - cifs //box/share rw
33 22 0:27 / /over rw - nfs server:/x rw
34 22 8:3 / /over rw - xfs /dev/sdc1 rw
torn line
35 22 0:28 / /phone rw - fuse.sshfs me@box: rw
"""


@pytest.mark.parametrize(
    ("folder", "kind"),
    [
        ("/srv", "nfs4"),
        ("/srv/hub/data", "nfs4"),
        ("/media/my share/hub", "cifs"),
        ("/phone/x", "fuse.sshfs"),
        ("/", None),
        ("/opt/hub", None),
        ("/srv/local/hub", None),
        ("/srvant", None),
        ("/over/hub", None),
    ],
)
def test_a_network_share_is_refused(tmp_path, folder, kind):
    (tmp_path / "mountinfo").write_text(MOUNTS)
    if kind is None:
        refuse_network_share(type(tmp_path)(folder), tmp_path / "mountinfo")
        return
    with pytest.raises(StoreError, match=rf"network share \({kind}\).*Choose a folder on a disk of this machine"):
        refuse_network_share(type(tmp_path)(folder), tmp_path / "mountinfo")


def test_where_the_system_does_not_list_its_mounts_the_folder_is_taken(tmp_path):
    refuse_network_share(tmp_path, tmp_path / "none")
    refuse_network_share(tmp_path)
