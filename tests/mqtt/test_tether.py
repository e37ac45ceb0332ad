"""The tether, with an ordinary program at its end: it must not outlive the process that tied it."""

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from mqtt.nodes import wait_for

from hub.mqtt import tether

PARENT = """
import os, subprocess, sys
child = subprocess.Popen([sys.executable, "-I", "-S", sys.argv[1], str(os.getpid()), "-1", "-1", sys.argv[2], "60"])
print(child.pid, flush=True)
child.wait()
"""
SLEEP = "/bin/sleep"


def running(pid: int) -> bool:
    try:
        return Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()[0] != "Z"
    except OSError:
        return False


@pytest.mark.skipif(sys.platform != "linux", reason="the kernel's request is Linux's own")
def test_the_program_ends_when_its_parent_is_killed():
    with subprocess.Popen([sys.executable, "-c", PARENT, tether.__file__, SLEEP], stdout=subprocess.PIPE) as parent:
        child = int(parent.stdout.readline())
        wait_for(lambda: "python" not in Path(f"/proc/{child}/exe").readlink().name)
        parent.send_signal(signal.SIGKILL)
        wait_for(lambda: not running(child), 5)


def test_a_program_whose_parent_is_gone_already_does_not_start():
    began = time.monotonic()
    done = subprocess.run(
        [sys.executable, "-I", "-S", tether.__file__, "1", "-1", "-1", SLEEP, "60"], timeout=20, check=False
    )
    assert done.returncode == tether.ORPHANED
    assert time.monotonic() - began < 15


@pytest.mark.skipif(os.geteuid() != 0, reason="only the superuser can become another user")
def test_the_user_is_changed_before_the_program_starts():
    done = subprocess.run(
        [sys.executable, "-I", "-S", tether.__file__, str(os.getpid()), "65534", "65534", "/usr/bin/id"],
        timeout=20,
        check=True,
        capture_output=True,
        text=True,
    )
    assert "uid=65534" in done.stdout
    assert "groups=65534" in done.stdout
