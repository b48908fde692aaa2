"""Ctrl-C that is heard even while Python is not: deep inside a long computation of a node.

Python raises KeyboardInterrupt between two of its own instructions, and a kernel at work for ten seconds is one
instruction. The operating system's signal handler writes a byte at once, though; a thread reads it, gives the build a
moment to end by itself, and otherwise ends the process. Nothing is lost: whatever lies in the store or in an output's
place was written whole, and what was kept is found again.
"""

from __future__ import annotations

import contextlib
import signal
import socket
import sys
import threading
from collections.abc import Iterator

from tangentry.pipeline.writing import end_at_once

GRACE = 1.0  # seconds to end in an orderly way
TOLD = "\ninterrupted: what was made is kept, and the next build goes on from there"
EXIT_CODE = 130


@contextlib.contextmanager
def heard_at_once() -> Iterator[None]:
    """While open, an interrupt ends this process within about `GRACE` seconds. Does nothing outside the main thread."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    ended = threading.Event()
    ours, theirs = socket.socketpair()
    theirs.setblocking(False)
    before = signal.set_wakeup_fd(theirs.fileno(), warn_on_full_buffer=False)
    listener = threading.Thread(target=_listen, args=(ours, ended), daemon=True)
    listener.start()
    try:
        yield
    finally:
        ended.set()
        signal.set_wakeup_fd(before)
        theirs.close()
        listener.join()
        ours.close()


def _listen(ours: socket.socket, ended: threading.Event) -> None:
    while told := ours.recv(1):
        if told[0] == signal.SIGINT and not ended.wait(GRACE):
            print(TOLD, file=sys.stderr, flush=True)
            end_at_once(EXIT_CODE)
