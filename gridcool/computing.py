"""Running the blocks: on threads of this process, or on a dask.distributed cluster by address."""

from __future__ import annotations

import hashlib
import importlib
from collections.abc import Callable, Sequence
from functools import cache
from importlib.resources import files
from importlib.resources.abc import Traversable
from typing import Any

from dask.base import compute
from dask.callbacks import Callback
from dask.delayed import Delayed
from threadpoolctl import threadpool_limits

from gridcool import __version__
from gridcool.errors import SettingsError

THREADS = "threads"
#: Rooms whose code decides what a block holds.
COMPUTING_ROOMS = ("physics", "engine")
CONNECT_SECONDS = 10
TEXTS = (".py", ".toml", ".j2", ".css", ".js", ".json")

Advance = Callable[[int, int], None]


def run_blocks(tasks: Sequence[Delayed], scheduler: str, advance: Advance) -> list[Any]:
    """Results of all tasks, in order.

    Parameters
    ----------
    tasks : sequence of dask Delayed
    scheduler : str
        "threads", or the address of a dask.distributed scheduler whose workers see the same
        folders.
    advance : callable
        Called with how many tasks are done, and how many there are.

    Raises
    ------
    SettingsError
        If there is no scheduler at the address, or the library for it is not installed.
    """
    if scheduler == THREADS:
        with _Counter(tasks, advance), threadpool_limits(1, "blas"):
            return list(compute(*tasks, scheduler="threads"))
    return _on_cluster(tasks, scheduler, advance)


def _on_cluster(tasks: Sequence[Delayed], address: str, advance: Advance) -> list[Any]:
    try:
        distributed = importlib.import_module("distributed")
    except ModuleNotFoundError:
        raise SettingsError(
            f'[compute] scheduler = "{address}" needs the package distributed; install '
            "gridcool[cluster]."
        ) from None
    try:
        client = distributed.Client(address, timeout=CONNECT_SECONDS, set_as_default=False)
    except (OSError, TimeoutError) as problem:
        raise SettingsError(
            f'[compute] scheduler = "{address}": no scheduler answers there ({problem}); start it, '
            'or write "threads".'
        ) from None
    with client:
        futures = client.compute(list(tasks))
        for done, _ in enumerate(distributed.as_completed(futures, loop=client.loop), start=1):
            advance(done, len(futures))
        return list(client.gather(futures))


class _Counter(Callback):
    """Counts finished tasks of a local run."""

    def __init__(self, tasks: Sequence[Delayed], advance: Advance) -> None:
        self._wanted = {task.key for task in tasks}
        self._total = len(self._wanted)
        self._advance = advance

    def _posttask(self, key: Any, _result: Any, _graph: Any, _state: Any, _worker: Any) -> None:
        if key in self._wanted:
            self._wanted.discard(key)
            self._advance(self._total - len(self._wanted), self._total)


@cache
def code_digest() -> str:
    """What stands for the version of the code that computes: its own text, and the release."""
    digest = hashlib.sha256(__version__.encode())
    for room in COMPUTING_ROOMS:
        _add_texts(digest, files("gridcool") / room)
    digest.update((files("gridcool") / "variables.toml").read_bytes())
    return digest.hexdigest()


@cache
def program_digest() -> str:
    """What stands for the version of the whole program: all its own files."""
    digest = hashlib.sha256(__version__.encode())
    _add_texts(digest, files("gridcool"))
    return digest.hexdigest()


def _add_texts(digest: Any, folder: Traversable) -> None:
    for entry in sorted(folder.iterdir(), key=lambda each: each.name):
        if entry.is_dir() and entry.name != "__pycache__":
            _add_texts(digest, entry)
        elif entry.name.endswith(TEXTS):
            digest.update(entry.name.encode())
            digest.update(entry.read_bytes())
