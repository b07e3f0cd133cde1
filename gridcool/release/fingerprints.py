"""Fingerprints of files: cheap to compare, sure when in doubt."""

from __future__ import annotations

import hashlib
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

from gridcool.errors import InputDataError

_BUFFER = 1 << 20


@dataclass(frozen=True)
class Fingerprint:
    """What a file is known by.

    Attributes
    ----------
    path : Path
        A file, or a folder such as a Zarr store, which is known by all its files.
    size : int
        Bytes, of all files together.
    changed : int
        Latest change, nanoseconds since 1970.
    sha256 : str
        Of the content; of a folder, of the names and contents of its files.
    """

    path: Path
    size: int
    changed: int
    sha256: str


def fingerprint(path: Path) -> Fingerprint:
    """Read a file or folder and tell what it is known by.

    Raises
    ------
    InputDataError
        If it cannot be read, or changed while it was read.
    """
    before = _look(path)
    digest = hashlib.sha256()
    try:
        for file in _files(path):
            if path.is_dir():
                digest.update(f"{file.relative_to(path).as_posix()}\0".encode())
            with file.open("rb") as opened:
                digest.update(hashlib.file_digest(opened, "sha256").digest())
    except OSError as problem:
        raise _unreadable(path, problem) from problem
    if _look(path) != before:
        raise changing(path)
    return Fingerprint(path, *before, digest.hexdigest())


def looks_same(known: Fingerprint) -> bool:
    """Whether a cheap look, at size and time of change only, finds the file as it was.

    Raises
    ------
    InputDataError
        If it has gone.
    """
    return _look(known.path) == (known.size, known.changed)


def require_unchanged(known: Iterable[Fingerprint]) -> None:
    """Refuse to go on if any file is not as it was when it was fingerprinted.

    Raises
    ------
    InputDataError
        With the file's name.
    """
    for each in known:
        if not looks_same(each):
            raise changing(each.path)


def changing(path: Path) -> InputDataError:
    """The refusal of a file that is being written."""
    return InputDataError(
        f"{path} changed while it was read, as if it were still being copied; nothing was "
        "published. Run again when it is complete."
    )


def _look(path: Path) -> tuple[int, int]:
    """Size and latest change."""
    try:
        states = [file.stat() for file in _files(path)]
    except OSError as problem:
        raise _unreadable(path, problem) from problem
    return sum(each.st_size for each in states), max((s.st_mtime_ns for s in states), default=0)


def _files(path: Path) -> list[Path]:
    """The file itself, or all files of a folder in order."""
    if not path.is_dir():
        return [path]
    return sorted(each for each in path.rglob("*") if each.is_file())


def _unreadable(path: Path, problem: OSError) -> InputDataError:
    return InputDataError(f"{path} cannot be read ({problem.strerror or problem}); check the path.")
