"""The block store: computed strips on disk, named after what went into them.

Each block is one file: a line that says what it is, its checksum, the array. It is written beside
and moved into place, so a killed run leaves whole blocks or none; what a disk has since damaged is
noticed by the checksum and thrown away, and so is what a power cut kept from reaching it; blocks
are therefore not forced to the disk one by one.
"""

from __future__ import annotations

import hashlib
import json
import logging
import secrets
from collections.abc import Collection
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from gridcool.errors import OutputError

FloatArray = NDArray[np.floating]

logger = logging.getLogger(__name__)

MAGIC = b"gridcool block 1\n"
SUFFIX = ".block"
HEADER = 256  # bytes, padded with spaces


@dataclass(frozen=True)
class BlockStore:
    """Blocks in a folder, which several processes or machines may share.

    Attributes
    ----------
    folder : Path
        Made when the first block is kept.
    """

    folder: Path

    def holds(self, key: str) -> bool:
        """Whether a whole and undamaged block is kept under this key; a damaged one is removed."""
        path = self._path(key)
        try:
            with path.open("rb") as file:
                return _checked(file.read()) is not None or self._discard(path)
        except FileNotFoundError:
            return False
        except OSError as problem:
            logger.warning("The block %s cannot be read (%s) and is computed again.", path, problem)
            return False

    def keep(self, key: str, values: FloatArray) -> None:
        """Keep a block, all of it or nothing.

        Raises
        ------
        OutputError
            If the disk is full or refuses.
        """
        path = self._path(key)
        temporary = path.with_name(f".{key}-{secrets.token_hex(4)}")
        body = np.ascontiguousarray(values, np.float32)
        header = {"shape": body.shape, "sha256": hashlib.sha256(body.data).hexdigest()}
        try:
            path.parent.mkdir(parents=True, exist_ok=True)
            try:
                with temporary.open("wb") as file:
                    file.write(MAGIC)
                    file.write(json.dumps(header).encode().ljust(HEADER - len(MAGIC)))
                    file.write(body.data)
                temporary.replace(path)
            finally:
                temporary.unlink(missing_ok=True)
        except OSError as problem:
            raise OutputError(
                f"A finished block cannot be kept in {self.folder} "
                f"({problem.strerror or problem}); make room or check the permissions. The blocks "
                "finished so far stay, and the last release is untouched."
            ) from problem

    def read(self, key: str) -> FloatArray:
        """A block that is held.

        Raises
        ------
        OutputError
            If it has gone or is damaged since it was written.
        """
        path = self._path(key)
        try:
            values = _checked(path.read_bytes())
        except OSError as problem:
            raise OutputError(
                f"The block {path} cannot be read ({problem.strerror or problem}); run again."
            ) from problem
        if values is None:
            self._discard(path)
            raise OutputError(
                f"The block {path} was damaged after it was written; check the disk and run again, "
                "which computes it anew."
            )
        return values

    def keep_only(self, keys: Collection[str]) -> int:
        """Remove all other blocks, and what killed runs left; return how many went."""
        wanted, removed = {f"{key}{SUFFIX}" for key in keys}, 0
        if not self.folder.is_dir():
            return 0
        for path in self.folder.glob("*/*"):
            if path.name not in wanted:
                path.unlink(missing_ok=True)
                removed += 1
        return removed

    def _path(self, key: str) -> Path:
        return self.folder / key[:2] / f"{key}{SUFFIX}"

    def _discard(self, path: Path) -> bool:
        logger.warning("The block %s is damaged and is computed again.", path)
        path.unlink(missing_ok=True)
        return False


def _checked(content: bytes) -> FloatArray | None:
    """The array of a block file, or None if it is not whole."""
    if len(content) < HEADER or not content.startswith(MAGIC):
        return None
    try:
        header = json.loads(content[len(MAGIC) : HEADER])
        shape, expected = tuple(header["shape"]), header["sha256"]
    except (ValueError, KeyError, TypeError):
        return None
    body = memoryview(content)[HEADER:]
    if len(body) != 4 * int(np.prod(shape)) or hashlib.sha256(body).hexdigest() != expected:
        return None
    return np.frombuffer(body, np.float32).reshape(shape)
