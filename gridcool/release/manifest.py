"""release.json: what went into a release, and what every file of it must be."""

from __future__ import annotations

import hashlib
import json
import platform
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any

from gridcool.errors import OutputError
from gridcool.release.fingerprints import Fingerprint

MANIFEST = "release.json"
FORMAT = 1
PACKAGES = (
    *("numpy", "scipy", "xarray", "dask", "rasterio", "netCDF4", "exactextract", "geopandas"),
    *("shapely", "pyproj", "matplotlib", "cartopy"),
)


@dataclass(frozen=True)
class Manifest:
    """What is known of a release.

    Attributes
    ----------
    release, created, version, code : str
        Name, time (RFC 3339), version of the program and digest of the code that computes.
    settings : mapping
        The whole settings, defaults included.
    inputs : sequence of mapping
        name, file, variable, size, changed, sha256 of each input file.
    files : mapping of (bytes, SHA-256)
        Every file of the release but release.json, by its path in it.
    packages : mapping of str
        Versions of the libraries that made it.
    """

    release: str
    created: str
    version: str
    code: str
    settings: Mapping[str, Any]
    inputs: Sequence[Mapping[str, Any]]
    files: Mapping[str, tuple[int, str]]
    packages: Mapping[str, str]


def input_entry(name: str, variable: str, found: Fingerprint) -> dict[str, Any]:
    """What a manifest says of one input file."""
    return {
        "name": name,
        "file": str(found.path),
        "variable": variable,
        "size": found.size,
        "changed": found.changed,
        "sha256": found.sha256,
    }


def package_versions() -> dict[str, str]:
    """Versions of Python and of the libraries that decide what a release holds."""
    found = {"python": platform.python_version()}
    for package in PACKAGES:
        try:
            found[package] = version(package)
        except PackageNotFoundError:
            continue
    return found


def checksums(folder: Path) -> dict[str, tuple[int, str]]:
    """Size and SHA-256 of every file below a folder but its manifest, by its path there."""
    found = {}
    for path in sorted(folder.rglob("*")):
        name = path.relative_to(folder).as_posix()
        if path.is_file() and name != MANIFEST:
            with path.open("rb") as file:
                digest = hashlib.file_digest(file, "sha256").hexdigest()
            found[name] = (path.stat().st_size, digest)
    return found


def write_manifest(folder: Path, manifest: Manifest) -> Path:
    """Write ``release.json``.

    Raises
    ------
    OutputError
        If it cannot be written.
    """
    path = folder / MANIFEST
    content = {
        "format": FORMAT,
        "release": manifest.release,
        "created": manifest.created,
        "version": manifest.version,
        "code": manifest.code,
        "settings": manifest.settings,
        "inputs": list(manifest.inputs),
        "packages": dict(manifest.packages),
        "files": {
            name: {"bytes": size, "sha256": digest}
            for name, (size, digest) in sorted(manifest.files.items())
        },
    }
    text = json.dumps(content, indent=2, ensure_ascii=False, sort_keys=False)
    try:
        path.write_text(text + "\n", encoding="utf-8")
    except OSError as problem:
        raise OutputError(
            f"{path} cannot be written ({problem.strerror or problem}); check free space and "
            "permissions. The last release stays."
        ) from problem
    return path


def read_manifest(folder: Path) -> Manifest:
    """Read ``release.json``.

    Raises
    ------
    OutputError
        If it is missing or not what this program writes.
    """
    path = folder / MANIFEST
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
        return Manifest(
            release=content["release"],
            created=content["created"],
            version=content["version"],
            code=content["code"],
            settings=content["settings"],
            inputs=content["inputs"],
            files={
                name: (int(each["bytes"]), str(each["sha256"]))
                for name, each in content["files"].items()
            },
            packages=content["packages"],
        )
    except OSError as problem:
        raise OutputError(
            f"{folder} is no release: {path.name} cannot be read ({problem.strerror or problem})."
        ) from None
    except (ValueError, KeyError, TypeError, AttributeError) as problem:
        raise OutputError(f"{path} is damaged ({problem}); it cannot be trusted.") from None
