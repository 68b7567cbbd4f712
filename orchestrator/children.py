"""Processes of ours beside a night: they end when their owner does, and Ctrl-C is not for them.

The owner holds the other end of their standard input; it closes when the owner has gone, however
that happened. Ctrl-C in a terminal reaches every process of its group, so each is given a group
of its own: the owner decides what ends.
"""

import asyncio
import contextlib
import os
import subprocess
import sys
import threading
from collections.abc import Sequence


def start_child(
    module: str, arguments: Sequence[str], *, stdout: int = subprocess.DEVNULL
) -> subprocess.Popen[bytes]:
    """Start a module of ours with this interpreter."""
    group = getattr(subprocess, "CREATE_NEW_PROCESS_GROUP", 0)  # Windows only
    return subprocess.Popen(
        [sys.executable, "-m", module, *arguments],
        stdin=subprocess.PIPE,
        stdout=stdout,
        stderr=None if stdout == subprocess.PIPE else subprocess.DEVNULL,
        start_new_session=os.name == "posix",
        creationflags=group,
    )


async def until_owner_has_gone() -> None:
    """Wait until standard input closes."""
    gone = asyncio.Event()
    loop = asyncio.get_running_loop()

    def watch() -> None:
        # Straight from the system: a thread in sys.stdin would hold its lock at the very end.
        with contextlib.suppress(OSError):
            while os.read(0, 4096):
                pass
        with contextlib.suppress(RuntimeError):  # the loop has ended before
            loop.call_soon_threadsafe(gone.set)

    threading.Thread(target=watch, daemon=True).start()
    await gone.wait()
