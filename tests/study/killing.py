"""Ways to kill a process that writes: at each of its system calls, at each step, at any instant."""

from __future__ import annotations

import ctypes
import os
import platform
import signal
import sys
import time

SYSTEM_CALLS = {  # of x86-64, all that change files, and those around them
    "write": 1, "open": 2, "close": 3, "pwrite64": 18, "writev": 20, "sendfile": 40, "flock": 73,
    "fsync": 74, "fdatasync": 75, "truncate": 76, "ftruncate": 77, "rename": 82, "mkdir": 83,
    "rmdir": 84, "creat": 85, "link": 86, "unlink": 87, "symlink": 88, "chmod": 90, "openat": 257,
    "mkdirat": 258, "unlinkat": 263, "renameat": 264, "linkat": 265, "symlinkat": 266,
    "fchmodat": 268, "fallocate": 285, "renameat2": 316, "copy_file_range": 326,
}  # fmt: skip
NUMBERS = frozenset(SYSTEM_CALLS.values())
TRACE_ME, PEEK_USER, SET_OPTIONS, GO_TO_CALL = 0, 3, 0x4200, 24
MARK_CALLS, END_WITH_US = 0x1, 0x100000
CALL_NUMBER = 15 * 8  # where the registers of a stopped process hold it
AT_CALL = signal.SIGTRAP | 0x80
STEPS = frozenset({"open", "os.mkdir", "os.rename", "os.remove", "os.rmdir", "fcntl.flock"})
FAILED = 3


def can_trace():
    """Whether this system lets us stop a child at its system calls."""
    if not (sys.platform == "linux" and platform.machine() == "x86_64"):
        return False
    try:
        return killed_at_call(lambda: None, None)[0] == 0
    except OSError:
        return False


def killed_at_call(write, k):
    """Run `write` in a child that dies before its k-th call: its exit status, calls counted."""
    libc = ctypes.CDLL(None, use_errno=True)
    libc.ptrace.argtypes = [ctypes.c_long, ctypes.c_long, ctypes.c_void_p, ctypes.c_void_p]
    libc.ptrace.restype = ctypes.c_long
    child = os.fork()
    if child == 0:
        if libc.ptrace(TRACE_ME, 0, None, None) != 0:
            os._exit(FAILED)
        os.kill(os.getpid(), signal.SIGSTOP)
        _run(write)
    _, status = os.waitpid(child, 0)
    if not os.WIFSTOPPED(status):
        raise OSError("a child cannot be traced")
    libc.ptrace(SET_OPTIONS, child, None, MARK_CALLS | END_WITH_US)
    count, entering, passed_on = 0, True, 0
    while True:
        libc.ptrace(GO_TO_CALL, child, None, passed_on)
        _, status = os.waitpid(child, 0)
        if not os.WIFSTOPPED(status):
            return os.waitstatus_to_exitcode(status), count
        stop = os.WSTOPSIG(status)
        passed_on = 0 if stop == AT_CALL else stop
        if stop != AT_CALL:
            continue
        if entering and libc.ptrace(PEEK_USER, child, CALL_NUMBER, None) in NUMBERS:
            count += 1
            if count == k:
                os.kill(child, signal.SIGKILL)
        entering = not entering


def killed_at_step(write, k):
    """Run `write` in a child that kills itself before its k-th step that Python knows of."""
    child = os.fork()
    if child == 0:
        left = [k]

        def step(event, _=None):
            if event in STEPS:
                left[0] -= 1
                if left[0] == 0:
                    os.kill(os.getpid(), signal.SIGKILL)

        def stepping(function):
            def wrapped(*arguments):
                step("open")
                return function(*arguments)

            return wrapped

        os.fsync, os.close = stepping(os.fsync), stepping(os.close)
        sys.addaudithook(step)
        _run(write)
    return os.waitstatus_to_exitcode(os.waitpid(child, 0)[1])


def killed_after(write, seconds):
    """Run `write` in a child that is killed after a while."""
    child = os.fork()
    if child == 0:
        _run(write)
    time.sleep(seconds)
    os.kill(child, signal.SIGKILL)
    return os.waitstatus_to_exitcode(os.waitpid(child, 0)[1])


def duration(write):
    """How long `write` takes in a child, s."""
    begun = time.monotonic()
    child = os.fork()
    if child == 0:
        _run(write)
    assert os.waitpid(child, 0)[1] == 0
    return time.monotonic() - begun


def _run(write):
    """The life of a child: it never comes back."""
    try:
        write()
    except BaseException:  # noqa: BLE001 - a child tells and ends
        sys.excepthook(*sys.exc_info())
        os._exit(FAILED)
    os._exit(0)
