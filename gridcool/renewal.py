"""Whether the current release still says what the inputs and settings say."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from gridcool.config import Settings
from gridcool.errors import OutputError
from gridcool.presenting import settings_record
from gridcool.release.fingerprints import Fingerprint, fingerprint, looks_same
from gridcool.release.manifest import MANIFEST, Manifest, read_manifest


def source_files(settings: Settings) -> list[tuple[str, Path]]:
    """Every file that decides what a release holds: inputs, divisors, regions."""
    found = []
    for name, given in settings.inputs.items():
        found.append((name, settings.resolve(given.path)))
        if given.divisor_path is not None:
            found.append((f"{name}_divisor", settings.resolve(given.divisor_path)))
    if settings.regions is not None and settings.regions.path is not None:
        found.append(("regions", settings.resolve(settings.regions.path)))
    return found


def reasons_to_run(settings: Settings, current: Path, code: str) -> Iterator[str]:
    """Why a new release is needed, as sentences; none if nothing changed.

    Files are first looked at cheaply, by size and time of change; only those that look different
    are read.

    Parameters
    ----------
    settings : Settings
    current : Path
        The current release; may be missing.
    code : str
        Digest of the program.

    Raises
    ------
    InputDataError
        If an input is gone, unreadable or changing.
    """
    if not current.exists():
        yield "there is no release yet"
        return
    try:
        manifest = read_manifest(current)
    except OutputError as problem:
        yield f"the current release cannot be trusted: {problem}"
        return
    yield from _changed_settings(settings, manifest)
    if manifest.code != code:
        yield "the program has changed"
    yield from _changed_inputs(settings, manifest)
    yield from _lost_files(current, manifest)


def _changed_settings(settings: Settings, manifest: Manifest) -> Iterator[str]:
    now = _flat(json.loads(json.dumps(settings_record(settings))))
    before = _flat(dict(manifest.settings))
    for key in sorted(set(now) | set(before)):
        if now.get(key) != before.get(key):
            yield f"setting {key} was {before.get(key)!r} and is {now.get(key)!r}"


def _flat(values: dict[str, Any], prefix: str = "") -> dict[str, Any]:
    """Nested settings as one level of dotted keys."""
    found: dict[str, Any] = {}
    for key, value in values.items():
        if isinstance(value, dict):
            found |= _flat(value, f"{prefix}{key}.")
        else:
            found[f"{prefix}{key}"] = value
    return found


def _changed_inputs(settings: Settings, manifest: Manifest) -> Iterator[str]:
    known = {entry["name"]: entry for entry in manifest.inputs}
    for name, path in source_files(settings):
        entry = known.get(name)
        if entry is None or entry["file"] != str(path):
            yield f"{name} is read from {path}"
            continue
        before = Fingerprint(path, entry["size"], entry["changed"], entry["sha256"])
        if not looks_same(before) and fingerprint(path).sha256 != before.sha256:
            yield f"{name} ({path}) has changed"


def _lost_files(current: Path, manifest: Manifest) -> Iterator[str]:
    """A cheap look for files of the release that have gone or changed their size."""
    for name, (size, _) in manifest.files.items():
        path = current / name
        if not path.is_file() or path.stat().st_size != size:
            yield f"{name} of the current release is missing or altered"
            return
    if not (current / MANIFEST).is_file():
        yield f"{MANIFEST} of the current release is missing"
