"""Tells a caller how far the writing has come."""

from __future__ import annotations

import threading
from collections.abc import Callable

Progress = Callable[[str, int, int], None]


class Report:
    """Counts steps that may finish in several threads and passes the count on, one at a time.

    Parameters
    ----------
    listener : callable, optional
        Takes what is being done, how many steps are done, and how many there are.
    what : str
    total : int
    """

    def __init__(self, listener: Progress | None, what: str, total: int) -> None:
        self._listener = listener
        self._what = what
        self._total = total
        self._done = 0
        self._lock = threading.Lock()

    def advance(self, steps: int = 1) -> None:
        """Count ``steps`` more."""
        if self._listener is None:
            return
        with self._lock:
            self._done += steps
            self._listener(self._what, self._done, self._total)
