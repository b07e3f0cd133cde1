"""Fingerprints: the same for the same content, other for any change, and none of moving files."""

from __future__ import annotations

import hashlib
import os
from pathlib import Path

import pytest

from gridcool.errors import InputDataError
from gridcool.release import fingerprints
from gridcool.release.fingerprints import fingerprint, looks_same, require_unchanged


def test_a_file(tmp_path: Path) -> None:
    path = tmp_path / "a.nc"
    path.write_bytes(b"content")
    found = fingerprint(path)
    assert found.size == 7
    inner = hashlib.sha256(b"content").digest()
    assert found.sha256 == hashlib.sha256(inner).hexdigest()
    assert looks_same(found)
    path.write_bytes(b"CONTENT")
    assert fingerprint(path).sha256 != found.sha256


def test_touching_changes_the_look_but_not_the_content(tmp_path: Path) -> None:
    path = tmp_path / "a.nc"
    path.write_bytes(b"content")
    found = fingerprint(path)
    os.utime(path, ns=(1, 1))
    assert not looks_same(found)
    assert fingerprint(path).sha256 == found.sha256
    with pytest.raises(InputDataError, match="changed while it was read"):
        require_unchanged([found])


def test_a_folder_is_known_by_all_its_files(tmp_path: Path) -> None:
    store = tmp_path / "a.zarr"
    (store / "c").mkdir(parents=True)
    (store / "zarr.json").write_text("{}")
    (store / "c" / "0").write_bytes(b"12")
    found = fingerprint(store)
    assert found.size == 4
    (store / "c" / "0").rename(store / "c" / "1")
    assert fingerprint(store).sha256 != found.sha256


def test_a_file_that_grows_while_it_is_read_is_refused(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "a.nc"
    path.write_bytes(b"content")
    real = hashlib.file_digest

    def slow(file: object, name: str) -> object:
        with path.open("ab") as more:
            more.write(b"!")
        return real(file, name)  # type: ignore[arg-type]

    monkeypatch.setattr(fingerprints.hashlib, "file_digest", slow)
    with pytest.raises(InputDataError, match="still being copied"):
        fingerprint(path)


def test_missing_and_unreadable(tmp_path: Path) -> None:
    with pytest.raises(InputDataError, match="cannot be read"):
        fingerprint(tmp_path / "nowhere.nc")
