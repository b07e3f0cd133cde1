"""Runs without anybody watching: refresh, resume, kills, two at once, files that change."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import rasterio
import xarray as xr

from gridcool import pipeline
from gridcool.cli import main
from gridcool.release import fingerprints
from gridcool.release.manifest import read_manifest
from gridcool.release.verify import release_problems

SETTINGS = """
[job]
output = "out"
[inputs.albedo]
path = "albedo.nc"
[inputs.cloud_fraction]
path = "cloud.nc"
[[criterion]]
layer = "rejected_flux"
worst = 40
best = 160
[regions]
boxes = 20.0
[maps]
layers = ["tilt"]
coastlines = false
"""


def write_input(folder: Path, name: str, values: np.ndarray) -> None:
    latitude, longitude = np.arange(-39.0, 40, 2), np.arange(1.0, 120, 2)
    dataset = xr.Dataset(
        {name: (("month", "lat", "lon"), values.astype(np.float32), {"units": "1"})},
        coords={"month": np.arange(1, 13), "lat": latitude, "lon": longitude},
    )
    dataset.to_netcdf(folder / f"{name.split('_')[0]}.nc")


def fields() -> dict[str, np.ndarray]:
    rng = np.random.default_rng(5)
    shape = (12, 40, 60)
    return {
        "albedo": rng.uniform(0.1, 0.4, shape),
        "cloud_fraction": rng.uniform(0.05, 0.95, shape),
    }


@pytest.fixture
def project(tmp_path: Path) -> Path:
    for name, values in fields().items():
        write_input(tmp_path, name, values)
    path = tmp_path / "project.toml"
    path.write_text(SETTINGS, encoding="utf-8")
    return path


def releases(project: Path) -> list[str]:
    return sorted(each.name for each in (project.parent / "out" / "releases").glob("*"))


def data(release: Path) -> dict[str, bytes]:
    """The layers' cells."""
    found = {}
    for path in sorted((release / "layers").glob("*.tif")):
        with rasterio.open(path) as file:
            found[path.stem] = file.read().tobytes()
    return found


def events(text: str) -> list[dict[str, Any]]:
    return [json.loads(line) for line in text.splitlines()]


def test_refresh_does_nothing_when_nothing_changed(
    project: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["refresh", str(project), "--quiet"]) == 0
    first = releases(project)
    assert len(first) == 1
    capsys.readouterr()
    start = time.monotonic()
    assert main(["refresh", str(project)]) == 0
    assert time.monotonic() - start < 20  # no computing; seconds are told by the benchmark
    assert "Nothing to do" in capsys.readouterr().out
    os.utime(project.parent / "albedo.nc")  # touched, the same content
    assert main(["refresh", str(project)]) == 0
    assert releases(project) == first
    assert main(["verify", str(project.parent / "out" / "current")]) == 0


def test_refresh_computes_only_what_changed(
    project: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["screen", str(project), "--json-lines"]) == 0
    done = events(capsys.readouterr().out)[-1]
    assert done["computed"] == done["blocks"] > 4
    before = data(project.parent / "out" / "current")
    changed = fields()["albedo"]
    changed[:, -1, :] += 0.05  # the northernmost row
    write_input(project.parent, "albedo", changed)
    assert main(["refresh", str(project), "--dry-run"]) == 0
    told = capsys.readouterr().out
    assert f"Would compute 1 of {done['blocks']} blocks" in told
    assert "albedo" in told
    assert len(releases(project)) == 1
    assert main(["refresh", str(project), "--json-lines"]) == 0
    again = events(capsys.readouterr().out)[-1]
    assert (again["event"], again["computed"]) == ("done", 1)
    after = data(project.parent / "out" / "current")
    assert after["rejected_flux"] != before["rejected_flux"]
    # The same as a run that starts from nothing.
    plain = project.parent / "plain.toml"
    plain.write_text(SETTINGS.replace('"out"', '"plain"'), encoding="utf-8")
    assert main(["screen", str(plain), "--quiet"]) == 0
    assert data(project.parent / "plain" / "current") == after


def test_a_changed_setting_or_lost_file_renews(
    project: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["screen", str(project), "--quiet"]) == 0
    project.write_text(SETTINGS.replace("best = 160", "best = 150"), encoding="utf-8")
    capsys.readouterr()
    assert main(["refresh", str(project), "--json-lines"]) == 0
    lines = events(capsys.readouterr().out)
    assert any("setting criterion" in line.get("text", "") for line in lines)
    assert lines[-1]["computed"] == 0  # suitability is not the engine's
    (project.parent / "out" / "current" / "layers" / "tilt.tif").unlink()
    assert main(["verify", str(project.parent / "out" / "current")]) == 5
    assert "tilt.tif is missing" in capsys.readouterr().err
    assert main(["refresh", str(project), "--quiet"]) == 0
    assert not list(release_problems(project.parent / "out" / "current"))


def test_damaged_blocks_are_computed_again(
    project: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["screen", str(project), "--quiet"]) == 0
    before = data(project.parent / "out" / "current")
    blocks = sorted((project.parent / "out" / ".work" / "blocks").rglob("*.block"))
    content = bytearray(blocks[0].read_bytes())
    content[1000] ^= 1
    blocks[0].write_bytes(content)
    blocks[1].write_bytes(b"")
    capsys.readouterr()
    assert main(["screen", str(project), "--json-lines"]) == 0
    assert events(capsys.readouterr().out)[-1]["computed"] == 2
    assert data(project.parent / "out" / "current") == before


def test_an_input_that_changes_during_the_run_is_not_published(
    project: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["screen", str(project), "--quiet"]) == 0
    first = releases(project)
    real = pipeline.present

    def meanwhile(*arguments: Any) -> None:
        real(*arguments)
        with (project.parent / "cloud.nc").open("ab") as file:
            file.write(b"more")

    monkeypatch.setattr(pipeline, "present", meanwhile)
    assert main(["screen", str(project)]) == 3
    assert "changed while it was read" in capsys.readouterr().err
    assert releases(project) == first
    assert fingerprints.looks_same is not None
    assert not list(release_problems(project.parent / "out" / "current"))


def run(project: Path, *options: str) -> subprocess.Popen[str]:
    return subprocess.Popen(
        [sys.executable, "-m", "gridcool", "screen", str(project), *options],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )


def wait_for(path: Path, process: subprocess.Popen[str]) -> None:
    until = time.monotonic() + 60
    while not list(path.rglob("*.block")) and time.monotonic() < until:
        assert process.poll() is None
        time.sleep(0.005)


def test_killed_runs_go_on_and_leave_the_release(project: Path) -> None:
    assert main(["screen", str(project), "--quiet"]) == 0
    first = releases(project)
    project.write_text(SETTINGS.replace("[regions]", "[sky]\nsnow_albedo = 0.45\n[regions]"))
    blocks = project.parent / "out" / ".work" / "blocks"
    known = len(list(blocks.rglob("*.block")))
    killed = run(project)
    until = time.monotonic() + 60
    while len(list(blocks.rglob("*.block"))) <= known + 1 and time.monotonic() < until:
        time.sleep(0.002)
    killed.kill()
    killed.communicate()
    assert releases(project) == first
    assert not list(release_problems(project.parent / "out" / "current"))
    resumed = run(project, "--json-lines")
    out, _ = resumed.communicate(timeout=120)
    assert resumed.returncode == 0
    done = events(out)[-1]
    assert done["computed"] < done["blocks"]
    assert not list(release_problems(project.parent / "out" / "current"))
    plain = project.parent / "plain.toml"
    plain.write_text(project.read_text().replace('"out"', '"plain"'), encoding="utf-8")
    assert main(["screen", str(plain), "--quiet"]) == 0
    assert data(project.parent / "plain" / "current") == data(project.parent / "out" / "current")
    assert not list((project.parent / "out" / ".work").glob("staging-*"))


def test_a_run_that_is_asked_to_end_ends_cleanly(project: Path) -> None:
    process = run(project)
    wait_for(project.parent / "out" / ".work", process)
    process.send_signal(signal.SIGTERM)
    _, told = process.communicate(timeout=60)
    assert process.returncode == 143
    assert "stopped; finished blocks are kept" in told
    assert "Traceback" not in told
    assert not list((project.parent / "out" / ".work").glob("staging-*"))


def test_the_second_run_is_turned_away(project: Path) -> None:
    from gridcool.release.lock import output_lock

    with output_lock(project.parent / "out"):
        for command in ("screen", "refresh"):
            start = time.monotonic()
            assert main([command, str(project)]) == 4
            assert time.monotonic() - start < 5


def test_a_read_only_output_folder(project: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (project.parent / "out").write_text("a file where the folder should be")
    assert main(["screen", str(project)]) == 5
    assert "Traceback" not in capsys.readouterr().err


def test_a_clock_set_back_makes_no_older_release_current(
    project: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    assert main(["screen", str(project), "--quiet"]) == 0
    first = (project.parent / "out" / "current").resolve()

    class Past(pipeline.datetime):  # type: ignore[name-defined,misc]
        @classmethod
        def now(cls, tz: Any = None) -> Any:
            return cls(2001, 1, 1, tzinfo=tz)

    monkeypatch.setattr(pipeline, "datetime", Past)
    assert main(["screen", str(project), "--quiet"]) == 0
    second = (project.parent / "out" / "current").resolve()
    assert second.name.startswith("20010101")
    assert read_manifest(second).release == second.name
    assert first.exists()


def test_what_json_lines_say_of_a_failure(
    project: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    (project.parent / "cloud.nc").unlink()
    assert main(["screen", str(project), "--json-lines"]) == 3
    failed = events(capsys.readouterr().out)[-1]
    assert failed["event"] == "failed"
    assert failed["exit_code"] == 3
    assert "cloud.nc" in failed["text"]
