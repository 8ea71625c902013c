"""Typing into a real shell on a pseudo-terminal, as a user who presses Tab."""

from __future__ import annotations

import os
import pty
import re
import select
import signal
import time

_ESCAPES = re.compile(
    r"\x1b\[[0-9;?>=]*[a-zA-Z]|\x1b[()][AB0]|\x1b[=>]|\x1b\][^\x07\x1b]*(\x07|\x1b\\)|[\x07\r]"
)


def type_and_tab(shell, setup, typed, environment, *, seconds=15.0):
    """Return what the terminal shows after `typed` and Tab, until it has been quiet for a while."""
    pid, master = pty.fork()
    if pid == 0:
        os.execvpe(shell[0], shell, environment)
    try:
        read_until(master, b"READY", seconds, setup + "\necho REA''DY\n")
        os.write(master, typed.encode())
        time.sleep(0.3)
        os.write(master, b"\t")
        return read_quiet(master, seconds)
    finally:
        os.kill(pid, signal.SIGKILL)
        os.waitpid(pid, 0)
        os.close(master)


def read_until(master, mark, seconds, first):
    time.sleep(0.5)
    os.write(master, first.encode())
    end, seen = time.monotonic() + seconds, b""
    while mark not in seen and time.monotonic() < end:
        if select.select([master], [], [], 0.2)[0]:
            seen += os.read(master, 65536)
    assert mark in seen, seen
    time.sleep(0.3)
    while select.select([master], [], [], 0.3)[0]:
        os.read(master, 65536)


def read_quiet(master, seconds):
    end, seen = time.monotonic() + seconds, b""
    while time.monotonic() < end:
        if select.select([master], [], [], 2.5 if not seen else 1.5)[0]:
            seen += os.read(master, 65536)
        elif seen:
            break
    return _ESCAPES.sub("", seen.decode("utf-8", "replace"))


def in_terminal(command, *, columns=80, **environment):
    """Return what a command prints on a terminal of that width."""
    import fcntl
    import struct
    import termios

    pid, master = pty.fork()
    if pid == 0:
        clean = {k: v for k, v in os.environ.items() if k not in ("NO_COLOR", "COLUMNS")}
        os.execvpe(command[0], command, {**clean, "TERM": "xterm", **environment})
    fcntl.ioctl(master, termios.TIOCSWINSZ, struct.pack("HHHH", 50, columns, 0, 0))
    seen = b""
    while True:
        try:
            chunk = os.read(master, 65536)
        except OSError:  # how Linux says that the other end is closed
            break
        if not chunk:
            break
        seen += chunk
    os.waitpid(pid, 0)
    os.close(master)
    return seen.decode("utf-8").replace("\r\n", "\n")
