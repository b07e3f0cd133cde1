"""Turns the libraries' complaints about a file into one sentence for people."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from gridcool.errors import OutputError


@contextmanager
def output_errors(path: Path, kinds: tuple[type[Exception], ...] = (OSError,)) -> Iterator[None]:
    """Raise an `OutputError` that names ``path`` for errors of the given kinds."""
    try:
        yield
    except kinds as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else str(error)
        raise OutputError(
            f"{path.name} could not be written and read back in {path.parent}: {reason}; "
            "check the free space and the permissions there."
        ) from error
