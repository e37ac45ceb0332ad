"""Starts a program that must not outlive the process that started it.

Run as a script: ``tether.py PARENT UID GID PROGRAM [ARGUMENT…]``. It asks the kernel for SIGTERM when its parent ends,
in whatever way, and then becomes the program. A broker that outlived its hub would hold the port, and the next
hub could not start.

A script of its own rather than a hook between fork and exec, because such a hook runs Python in a copy of a process
with several threads, which may hang. The request is bound to the parent's *thread*: whoever starts this must do so from
a thread that lives as long as the child shall. It is also cleared when a process changes its user, so the
change of user happens here, before it; UID -1 changes nothing.
"""

import ctypes
import os
import signal
import sys

PR_SET_PDEATHSIG = 1
# The parent ended before the request was made; nobody is left to read the code.
ORPHANED = 75


def main(arguments: list[str]) -> None:
    """Become the program that the arguments name."""
    parent, uid, gid = (int(text) for text in arguments[:3])
    program = arguments[3:]
    if uid >= 0:
        os.setgroups([])
        os.setgid(gid)
        os.setuid(uid)
    prctl = getattr(ctypes.CDLL(None, use_errno=True), "prctl", None)
    if prctl is not None:  # Linux has it; elsewhere the hub's orderly stop has to do
        prctl(PR_SET_PDEATHSIG, signal.SIGTERM, 0, 0, 0)
    if os.getppid() != parent:
        sys.exit(ORPHANED)
    try:
        os.execv(program[0], program)  # noqa: S606 - no shell is wanted
    except OSError as error:
        sys.exit(f"cannot run {program[0]}: {error.strerror}")


if __name__ == "__main__":
    main(sys.argv[1:])
