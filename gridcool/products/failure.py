"""Turns the libraries' complaints about a file into one sentence for people."""

from __future__ import annotations

import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from gridcool.errors import OutputError


@contextmanager
def output_errors(path: Path, kinds: tuple[type[Exception], ...] = (OSError,)) -> Iterator[None]:
    """Raise an `OutputError` that names ``path`` for errors of the given kinds.

    The free space is told too: some libraries call a full disk just an error.
    """
    try:
        yield
    except kinds as error:
        raise OutputError(
            f"{path.name} could not be written and read back in {path.parent}: {_reason(error)}; "
            f"check the permissions and the free space there{_free_space(path.parent)}."
        ) from error


def _reason(error: BaseException) -> str:
    while error.__cause__ is not None:  # rasterio wraps what GDAL said
        error = error.__cause__
    text = error.strerror if isinstance(error, OSError) and error.strerror else str(error)
    return " ".join(text.split()).rstrip(".") or type(error).__name__


def _free_space(folder: Path) -> str:
    try:
        return f" (now {shutil.disk_usage(folder).free / 1e6:.1f} MB)"
    except OSError:
        return ""
