"""release.json, and holding a release against it."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from gridcool.errors import OutputError
from gridcool.release.fingerprints import fingerprint
from gridcool.release.manifest import (
    MANIFEST,
    Manifest,
    checksums,
    input_entry,
    package_versions,
    read_manifest,
    write_manifest,
)
from gridcool.release.verify import release_problems


@pytest.fixture
def release(tmp_path: Path) -> Path:
    folder = tmp_path / "20260101T000000.000000Z"
    (folder / "layers").mkdir(parents=True)
    (folder / "layers" / "tilt.tif").write_bytes(b"tilt")
    (folder / "report.html").write_text("report")
    source = tmp_path / "albedo.nc"
    source.write_bytes(b"albedo")
    manifest = Manifest(
        release=folder.name,
        created="2026-01-01T00:00:00Z",
        version="0",
        code="abc",
        settings={"job": {"name": "“Invented”"}},
        inputs=[input_entry("albedo", "alb", fingerprint(source))],
        files=checksums(folder),
        packages=package_versions(),
    )
    write_manifest(folder, manifest)
    return folder


def test_what_is_written_comes_back(release: Path) -> None:
    found = read_manifest(release)
    assert found.release == release.name
    assert set(found.files) == {"layers/tilt.tif", "report.html"}
    assert found.files["report.html"][0] == 6
    assert found.settings["job"]["name"] == "“Invented”"
    assert found.inputs[0]["variable"] == "alb"
    assert len(found.inputs[0]["sha256"]) == 64
    assert "numpy" in found.packages
    assert list(release_problems(release)) == []


def test_the_same_bytes_every_time(release: Path) -> None:
    before = (release / MANIFEST).read_bytes()
    write_manifest(release, read_manifest(release))
    assert (release / MANIFEST).read_bytes() == before


def test_every_kind_of_damage_is_told(release: Path) -> None:
    (release / "layers" / "tilt.tif").write_bytes(b"tils")
    assert list(release_problems(release)) == [
        "layers/tilt.tif is altered: its checksum is not that of release.json."
    ]
    (release / "layers" / "tilt.tif").write_bytes(b"til")
    assert "3 bytes and not 4" in next(iter(release_problems(release)))
    (release / "layers" / "tilt.tif").unlink()
    (release / "extra.txt").write_text("?")
    assert list(release_problems(release)) == [
        "layers/tilt.tif is missing.",
        "extra.txt is not told of in release.json.",
    ]


@pytest.mark.parametrize("content", ["", "{", "[]", '{"release": "x"}'])
def test_a_damaged_manifest_is_not_trusted(release: Path, content: str) -> None:
    (release / MANIFEST).write_text(content)
    with pytest.raises(OutputError, match="damaged"):
        read_manifest(release)


def test_a_folder_that_is_no_release(tmp_path: Path) -> None:
    with pytest.raises(OutputError, match="no release"):
        read_manifest(tmp_path)


def test_a_manifest_that_cannot_be_written(release: Path) -> None:
    manifest = read_manifest(release)
    with pytest.raises(OutputError, match="cannot be written"):
        write_manifest(release / "missing", manifest)
    assert json.loads((release / MANIFEST).read_text())["format"] == 1
