"""One run at a time in an output folder.

The lock is the operating system's own on an open file: it ends with the process that holds it,
however that ends, so none is ever left over. Beside it stands who holds it.
"""

from __future__ import annotations

import json
import os
import socket
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path

from filelock import FileLock, Timeout

from gridcool.errors import BusyError, OutputError
from gridcool.release.publish import WORK

LOCK = "lock"
HOLDER = "lock-holder.json"


@contextmanager
def output_lock(output: Path) -> Iterator[None]:
    """Hold the output folder for one run.

    Raises
    ------
    BusyError
        At once, if another run holds it; the message tells who.
    OutputError
        If the folder cannot be made or locked.
    """
    folder = output / WORK
    try:
        folder.mkdir(parents=True, exist_ok=True)
        lock = FileLock(folder / LOCK)
        lock.acquire(timeout=0)
    except Timeout:
        raise BusyError(
            f"Another run is active in {output}{_who(folder / HOLDER)}; wait for it or set another "
            "[job] output."
        ) from None
    except OSError as problem:
        raise OutputError(
            f"The output folder {output} cannot be locked ({problem.strerror or problem}); check "
            "its permissions, or set another [job] output. The last release stays."
        ) from problem
    try:
        _tell(folder / HOLDER)
        yield
    finally:
        (folder / HOLDER).unlink(missing_ok=True)
        lock.release()


def _tell(path: Path) -> None:
    """Write down who holds the lock; only a courtesy, so that nothing hangs on it."""
    holder = {
        "process": os.getpid(),
        "host": socket.gethostname(),
        "since": f"{datetime.now(UTC):%Y-%m-%dT%H:%M:%SZ}",
        "command": " ".join(["gridcool", *sys.argv[1:]]),
    }
    try:
        path.write_text(json.dumps(holder) + "\n", encoding="utf-8")
    except OSError as problem:
        raise OutputError(
            f"{path} cannot be written ({problem.strerror or problem}); check free space and "
            "permissions. The last release stays."
        ) from problem


def _who(path: Path) -> str:
    try:
        holder = json.loads(path.read_text(encoding="utf-8"))
        return (
            f" (process {holder['process']} on {holder['host']} since {holder['since']}: "
            f"{holder['command']})"
        )
    except (OSError, ValueError, KeyError, TypeError):
        return ""  # it has just begun, or just ended
