"""Hold a release against its own manifest."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

from gridcool.release.manifest import MANIFEST, checksums, read_manifest


def release_problems(folder: Path) -> Iterator[str]:
    """A sentence for every file that is missing, altered or not told of; none if all is well.

    Raises
    ------
    OutputError
        If the folder has no manifest that can be read.
    """
    expected, found = read_manifest(folder).files, checksums(folder)
    for name, (size, digest) in sorted(expected.items()):
        if name not in found:
            yield f"{name} is missing."
        elif found[name][0] != size:
            yield f"{name} has {found[name][0]} bytes and not {size}."
        elif found[name][1] != digest:
            yield f"{name} is altered: its checksum is not that of {MANIFEST}."
    for name in sorted(set(found) - set(expected)):
        yield f"{name} is not told of in {MANIFEST}."
