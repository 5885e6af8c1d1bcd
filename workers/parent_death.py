"""A process that does not outlive the one that started it (Linux, prctl(2): PR_SET_PDEATHSIG)."""

import ctypes
import os
import signal

PR_SET_PDEATHSIG = 1


def die_with_parent(parent_pid: int) -> None:
    """Ask the kernel to kill this process when its parent ends; ends at once where that has happened already.

    `parent_pid` was taken before the fork: a parent that is process 1 of its container is a parent too.
    """
    if ctypes.CDLL(None, use_errno=True).prctl(PR_SET_PDEATHSIG, signal.SIGKILL) != 0:
        raise OSError(ctypes.get_errno(), "prctl refused to tie this process to its parent")
    if os.getppid() != parent_pid:
        os._exit(1)
