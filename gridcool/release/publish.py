"""Publishing: a product is finished out of sight, moved into place, then switched to at once.

``OUT/current`` is a relative symbolic link to the newest release. It is replaced by renaming a new
link over it, which the operating system does in one step: whoever looks finds the old release or
the new one, never anything in between, whatever moment the run dies at.
"""

from __future__ import annotations

import fcntl
import logging
import os
import re
import secrets
import shutil
import tempfile
from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path

from gridcool.errors import OutputError
from gridcool.grid import Grid
from gridcool.variables import layer_variables

CURRENT = "current"
RELEASES = "releases"
WORK = ".work"
STAMP = re.compile(r"\d{4}-?\d{2}-?\d{2}[T_-][0-9A-Za-z._-]+")
FILE_OVERHEAD = 1_000_000  # bytes beside the cells: headers, padding of the last chunks

logger = logging.getLogger(__name__)


def release_stamp(moment: datetime) -> str:
    """Name of a release finished at ``moment``: UTC to the microsecond, sorting by age."""
    return moment.astimezone(UTC).strftime("%Y%m%dT%H%M%S.%fZ")


def needed_bytes(grid: Grid, layers: Iterable[str]) -> int:
    """Free space that writing and publishing these layers may take at most, in bytes.

    The cells lie on the disk four times for a while: in the block store, uncompressed on their way
    (with their overviews, a third more), as GeoTIFF (overviews included) and in the NetCDF.

    Parameters
    ----------
    grid : Grid
    layers : iterable of str
        Names declared in ``variables.toml``.
    """
    total = FILE_OVERHEAD
    for name in layers:
        layer = layer_variables()[name]
        cells = grid.rows * grid.columns * layer.count * (2 if layer.is_flags else 4)
        total += round(cells * (4 / 3 + 4 / 3 + 1)) + FILE_OVERHEAD
        total += 4 * grid.rows * grid.columns * layer.count  # blocks hold single precision only
    return total


def require_space(output: Path, needed: int) -> None:
    """Refuse to begin what would fill the disk.

    Raises
    ------
    OutputError
        If fewer than ``needed`` bytes are free where ``output`` lies or will lie.
    """
    existing = next(p for p in (output, *output.absolute().parents) if p.exists())
    free = shutil.disk_usage(existing).free
    if free < needed:
        raise OutputError(
            f"{output} has {free / 1e9:.2f} GB free and this run needs up to {needed / 1e9:.2f} GB "
            "while it writes; free some space, lower [release] keep, or set another [job] output."
        )


@contextmanager
def staging_folder(output: Path) -> Iterator[Path]:
    """A fresh folder ``OUT/.work/staging-…`` to build a product in, gone afterwards.

    It lies on the same disk as the releases, so that `publish` can move it in one step. What runs
    that were killed have left behind is removed first: a living run holds a lock on its folder,
    which the system lets go when the process ends, however it ends.

    Raises
    ------
    OutputError
        If the folder cannot be made.
    """
    with _refusals(output):
        check_output(output)
        (output / WORK).mkdir(parents=True, exist_ok=True)
        # Not by tempfile: its folders are closed to others, and the release would be too.
        staged = output / WORK / f"staging-{secrets.token_hex(4)}"
        _remove_abandoned(output / WORK)
        staged.mkdir()
        handle = _lock(staged)
    try:
        yield staged
    finally:
        shutil.rmtree(staged, ignore_errors=True)
        os.close(handle)


def _remove_abandoned(work: Path) -> None:
    """Delete what killed runs left: links not moved, folders that no living process holds."""
    for link in work.glob(f"{CURRENT}-*"):
        link.unlink(missing_ok=True)
    for folder in (*work.glob("staging-*"), *work.glob("expired-*")):
        try:
            handle = _lock(folder)
        except OSError:  # held by a living run, or gone by now
            continue
        shutil.rmtree(folder, ignore_errors=True)
        os.close(handle)


def _lock(folder: Path) -> int:
    """Take the folder's lock or fail at once; closing the handle gives it back."""
    handle = os.open(folder, os.O_RDONLY)
    try:
        fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError:
        os.close(handle)
        raise
    return handle


def check_output(output: Path) -> None:
    """Refuse an output folder in which a release could not be switched to.

    Raises
    ------
    OutputError
        If ``OUT/current`` exists and is not a symbolic link.
    """
    current = output / CURRENT
    if current.exists() and not current.is_symlink():
        raise OutputError(
            f"{current} exists and is not a link to a release; move it away or set another "
            "[job] output. It was left as it is."
        )


def publish(staged: Path, output: Path, *, keep: int, stamp: str) -> Path:
    """Make a finished product the current release.

    Parameters
    ----------
    staged : Path
        Folder from `staging_folder` of the same output, complete; it is moved away.
    output : Path
    keep : int
        How many releases to keep, the current one included; at least 1.
    stamp : str
        Name of the release, see `release_stamp`.

    Returns
    -------
    Path
        ``OUT/releases/<stamp>``.

    Raises
    ------
    OutputError
        If the release cannot be put in place. The release that was current still is, and the
        product is still in ``staged``.
    """
    if not STAMP.fullmatch(stamp):
        raise ValueError(f"{stamp!r} is not a release stamp")
    if keep < 1:
        raise ValueError("at least one release must be kept")
    release = output / RELEASES / stamp
    with _refusals(output):
        check_output(output)
        if release.exists():
            raise OutputError(f"The release {release} exists already; nothing was changed.")
        _sync_tree(staged)
        release.parent.mkdir(exist_ok=True)
        (output / WORK).mkdir(exist_ok=True)
        staged.rename(release)
        try:
            _sync(release.parent)
            _switch(output, stamp)
        except BaseException:
            if (output / CURRENT).resolve() != release.resolve():
                release.rename(staged)
            raise
        _sync(output)
    _prune(output, keep)
    return release


def _switch(output: Path, stamp: str) -> None:
    """Point ``OUT/current`` to a release in one step."""
    link = output / WORK / f"{CURRENT}-{secrets.token_hex(4)}"  # reads right once it is moved
    link.symlink_to(Path(RELEASES) / stamp, target_is_directory=True)
    try:
        link.replace(output / CURRENT)
    except BaseException:
        link.unlink(missing_ok=True)
        raise


def _prune(output: Path, keep: int) -> None:
    """Remove the oldest releases beyond ``keep``; what cannot be removed is only reported.

    A release leaves ``releases`` in one step and is deleted after, so that none is ever there in
    parts. Folders that do not bear a release's name are not ours and stay.
    """
    current = (output / CURRENT).resolve()
    others = sorted(
        folder
        for folder in (output / RELEASES).iterdir()
        if STAMP.fullmatch(folder.name) and folder.resolve() != current
    )
    for old in others[: max(0, len(others) + 1 - keep)]:
        try:
            expired = Path(tempfile.mkdtemp(prefix="expired-", dir=output / WORK))
            shutil.rmtree(old.rename(expired / old.name).parent)
        except OSError as error:
            logger.warning("The old release %s could not be removed: %s", old, error)


def _sync_tree(folder: Path) -> None:
    """Have every file and folder below on the disk, not only in the system's memory."""
    for root, _, files in os.walk(folder):
        for name in files:
            _sync(Path(root) / name)
        _sync(Path(root))


def _sync(path: Path) -> None:
    handle = os.open(path, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


@contextmanager
def _refusals(output: Path) -> Iterator[None]:
    """One sentence for what the file system refuses."""
    try:
        yield
    except OSError as error:
        raise OutputError(
            f"The output folder {output} cannot be written ({error.strerror or error}); check its "
            "permissions and free space, or set another [job] output. The last release stays."
        ) from error
