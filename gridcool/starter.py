"""A starter project: the invented demonstration data and their commented settings."""

from __future__ import annotations

import shutil
from importlib.resources import as_file, files
from pathlib import Path

from gridcool.errors import OutputError

PACKED = "demo_data"  # inside an installed package
BESIDE = "data_demo"  # beside the package, where it runs from its repository
SETTINGS = "gridcool.toml"


def write_starter(folder: Path) -> Path:
    """Copy the demonstration into a new folder.

    Returns
    -------
    Path
        The settings file.

    Raises
    ------
    OutputError
        If the folder exists already or cannot be written.
    """
    if folder.exists():
        raise OutputError(f"{folder} exists already; name a folder that does not.")
    try:
        with as_file(files("gridcool")) as package:
            packed = package / PACKED
            source = packed if packed.is_dir() else package.parent / BESIDE
            shutil.copytree(source, folder, ignore=shutil.ignore_patterns("out", ".*"))
    except OSError as problem:
        raise OutputError(f"{folder} cannot be written ({problem.strerror or problem}).") from None
    return folder / SETTINGS
