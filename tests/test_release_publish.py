"""Publishing: all or nothing, whatever happens and whenever."""

from __future__ import annotations

import logging
import os
import signal
import subprocess
import sys
import threading
from collections.abc import Iterator
from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path

import pytest

from gridcool.errors import OutputError
from gridcool.grid import Grid
from gridcool.release.publish import (
    needed_bytes,
    publish,
    release_stamp,
    require_space,
    staging_folder,
)
from gridcool.variables import layer_variables

START = datetime(2001, 2, 3, 4, 5, 6, tzinfo=UTC)


def stamps() -> Iterator[str]:
    moment = START
    while True:
        yield release_stamp(moment)
        moment += timedelta(microseconds=1)


def release(output: Path, stamp: str, content: str, keep: int = 3) -> Path:
    with staging_folder(output) as staged:
        (staged / "layers").mkdir()
        (staged / "layers" / "tilt.tif").write_text(content)
        (staged / "layers.nc").write_text(content)
        return publish(staged, output, keep=keep, stamp=stamp)


def snapshot(folder: Path) -> dict[str, str]:
    return {
        str(path.relative_to(folder)): (
            f"-> {path.readlink()}" if path.is_symlink() else path.read_text()
        )
        for path in sorted(folder.rglob("*"))
        if path.is_symlink() or path.is_file()
    }


def test_a_release_is_whole_and_current(tmp_path: Path) -> None:
    output = tmp_path / "deep" / "out"
    folder = release(output, release_stamp(START), "one")
    assert folder == output / "releases" / "20010203T040506.000000Z"
    assert (output / "current").readlink() == Path("releases") / folder.name  # moves with OUT
    assert (output / "current" / "layers" / "tilt.tif").read_text() == "one"
    assert sorted(path.name for path in output.iterdir()) == [".work", "current", "releases"]
    assert not list((output / ".work").iterdir())
    assert folder.stat().st_mode & 0o055 == 0o055 & ~umask()


def umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask


def test_stamps_are_utc_and_sort_by_age() -> None:
    east = datetime(2001, 2, 3, 6, 5, 6, 7, tzinfo=timezone(timedelta(hours=2)))
    assert release_stamp(east) == "20010203T040506.000007Z"
    made = [release_stamp(START + timedelta(seconds=n, days=n)) for n in range(40)]
    assert made == sorted(made)


def test_old_releases_go_but_never_the_current_one(tmp_path: Path) -> None:
    names = [name for name, _ in zip(stamps(), range(6), strict=False)]
    for name in names[:5]:
        release(tmp_path, name, name, keep=3)
    assert sorted(p.name for p in (tmp_path / "releases").iterdir()) == names[2:5]
    # A clock that went backwards: the newest release has the oldest name and still stays.
    release(tmp_path, "19990101T000000Z", "old clock", keep=1)
    assert [p.name for p in (tmp_path / "releases").iterdir()] == ["19990101T000000Z"]
    assert (tmp_path / "current" / "layers.nc").read_text() == "old clock"


def test_what_is_not_a_release_is_never_removed(tmp_path: Path) -> None:
    (tmp_path / "releases" / "my notes").mkdir(parents=True)
    (tmp_path / "releases" / "readme.txt").write_text("keep me")
    for name, _ in zip(stamps(), range(3), strict=False):
        release(tmp_path, name, name, keep=1)
    kept = sorted(path.name for path in (tmp_path / "releases").iterdir())
    assert kept == [name, "my notes", "readme.txt"]


def test_an_old_release_that_cannot_be_removed_is_only_reported(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, caplog: pytest.LogCaptureFixture
) -> None:
    names = stamps()
    release(tmp_path, next(names), "one")

    def refuse(*args: object, **kwargs: object) -> str:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("gridcool.release.publish.tempfile.mkdtemp", refuse)
    with caplog.at_level(logging.WARNING):
        release(tmp_path, next(names), "two", keep=1)
    assert "could not be removed" in caplog.text
    assert (tmp_path / "current" / "layers.nc").read_text() == "two"


def test_a_failed_build_leaves_no_trace(tmp_path: Path) -> None:
    release(tmp_path, release_stamp(START), "good")
    before = snapshot(tmp_path)

    def build() -> None:
        with staging_folder(tmp_path) as staged:
            (staged / "half").write_text("half")
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        build()
    assert snapshot(tmp_path) == before
    assert not list((tmp_path / ".work").iterdir())


@pytest.mark.parametrize("step", ["_sync_tree", "_sync", "_switch"])
@pytest.mark.parametrize("error", [OSError(28, "No space left on device"), KeyboardInterrupt()])
def test_a_failed_publication_leaves_the_last_release(
    step: str, error: BaseException, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    names = stamps()
    release(tmp_path, next(names), "good")
    before = snapshot(tmp_path)

    def fail(*args: object) -> None:
        raise error

    with monkeypatch.context() as patch:
        patch.setattr(f"gridcool.release.publish.{step}", fail)
        with pytest.raises((OutputError, KeyboardInterrupt)) as caught:
            release(tmp_path, next(names), "bad")
    if isinstance(error, OSError):
        assert "No space left on device" in str(caught.value)
        assert "\n" not in str(caught.value)
    assert snapshot(tmp_path) == before
    release(tmp_path, next(names), "better")
    assert (tmp_path / "current" / "layers.nc").read_text() == "better"


def test_current_is_never_missing_while_it_is_switched(tmp_path: Path) -> None:
    names = stamps()
    release(tmp_path, next(names), "0")
    done = threading.Event()
    trouble: list[str] = []

    def look() -> None:
        while not done.is_set():
            try:
                (tmp_path / "current").readlink()
            except OSError as error:
                trouble.append(str(error))

    watcher = threading.Thread(target=look)
    watcher.start()
    for number in range(1, 60):
        release(tmp_path, next(names), str(number), keep=2)
    done.set()
    watcher.join()
    assert not trouble
    assert (tmp_path / "current" / "layers.nc").read_text() == "59"


def test_a_current_that_is_no_link_is_left_alone(tmp_path: Path) -> None:
    (tmp_path / "current").mkdir()
    (tmp_path / "current" / "precious.txt").write_text("mine")
    with pytest.raises(OutputError, match="is not a link to a release"):
        release(tmp_path, release_stamp(START), "one")
    assert snapshot(tmp_path) == {"current/precious.txt": "mine"}


def test_a_broken_link_is_replaced(tmp_path: Path) -> None:
    (tmp_path / "current").symlink_to("releases/gone")
    release(tmp_path, release_stamp(START), "one")
    assert (tmp_path / "current" / "layers.nc").read_text() == "one"


def test_a_release_is_never_overwritten(tmp_path: Path) -> None:
    release(tmp_path, release_stamp(START), "first")
    before = snapshot(tmp_path)
    with pytest.raises(OutputError, match="exists already"):
        release(tmp_path, release_stamp(START), "second")
    assert snapshot(tmp_path) == before


@pytest.mark.parametrize("stamp", ["../20010203T040506Z", "", "latest", "20010203T/x"])
def test_strange_stamps_are_refused(stamp: str, tmp_path: Path) -> None:
    with pytest.raises(ValueError, match="release stamp"):
        release(tmp_path, stamp, "one")
    assert not (tmp_path / "releases").exists()


def test_an_output_that_is_a_file_is_told(tmp_path: Path) -> None:
    (tmp_path / "out").write_text("a file")
    with (
        pytest.raises(OutputError, match=r"output folder .*out cannot be written"),
        staging_folder(tmp_path / "out"),
    ):
        pass


def test_a_read_only_output_is_told(tmp_path: Path) -> None:
    """In a process without root's rights, which no permission bit stops."""
    release(tmp_path, release_stamp(START), "good")
    before = snapshot(tmp_path)
    code = """
import os, sys
from pathlib import Path
from gridcool.errors import OutputError
from gridcool.release.publish import staging_folder
if os.geteuid() == 0:
    os.setgid(65534)
    os.setuid(65534)
try:
    with staging_folder(Path(sys.argv[1])):
        print("got in")
except OutputError as error:
    print(error)
"""
    folders = [tmp_path, tmp_path / ".work", *tmp_path.parents[:1]]
    modes = [folder.stat().st_mode for folder in folders]
    for folder in reversed(folders):
        folder.chmod(0o555)
    try:
        told = subprocess.run(
            [sys.executable, "-c", code, str(tmp_path)], capture_output=True, text=True, check=False
        )
    finally:
        for folder, mode in zip(folders, modes, strict=True):
            folder.chmod(mode)
    if "ermission" in told.stderr and not told.stdout:
        pytest.skip("an unprivileged user cannot reach the interpreter or the test folder here")
    assert f"The output folder {tmp_path} cannot be written (Permission denied)" in told.stdout
    assert snapshot(tmp_path) == before


KILLED = """
import os, signal, sys
from pathlib import Path
from gridcool.release import publish as module
point = sys.argv[2]

def die(*args, **kwargs):
    print("dying", flush=True)
    os.kill(os.getpid(), signal.SIGKILL)

output = Path(sys.argv[1])
if point != "build":
    setattr(module, point, die)
with module.staging_folder(output) as staged:
    (staged / "layers.nc").write_text("new")
    if point == "build":
        die()
    module.publish(staged, output, keep=1, stamp="20010203T040507Z")
"""


@pytest.mark.parametrize("point", ["build", "_sync_tree", "_sync", "_switch", "_prune"])
def test_a_killed_run_leaves_a_whole_current_release(point: str, tmp_path: Path) -> None:
    release(tmp_path, release_stamp(START), "old")
    killed = subprocess.run(
        [sys.executable, "-c", KILLED, str(tmp_path), point],
        capture_output=True,
        text=True,
        check=False,
    )
    assert killed.returncode == -signal.SIGKILL, killed.stderr
    assert killed.stdout == "dying\n"
    expected = "new" if point == "_prune" else "old"
    assert (tmp_path / "current" / "layers.nc").read_text() == expected
    # The next run clears up after the killed one and publishes as if nothing had been.
    release(tmp_path, "20010203T040508Z", "next", keep=1)
    assert (tmp_path / "current" / "layers.nc").read_text() == "next"
    assert [path.name for path in (tmp_path / "releases").iterdir()] == ["20010203T040508Z"]
    assert not list((tmp_path / ".work").iterdir())


def test_a_living_run_keeps_its_staging_folder(tmp_path: Path) -> None:
    with staging_folder(tmp_path) as first:
        (first / "work").write_text("mine")
        with staging_folder(tmp_path) as second:
            assert second != first
            assert (first / "work").read_text() == "mine"
        assert not second.exists()
        assert (first / "work").exists()


def test_needed_bytes_are_in_proportion() -> None:
    layers = list(layer_variables())
    grid = Grid(-180.0, 90.0, 0.25, 0.25, 720, 1440)
    raw = sum(
        (12 if layer.bands == "month" else 1) * (2 if layer.is_flags else 4)
        for layer in layer_variables().values()
    ) * (720 * 1440)
    needed = needed_bytes(grid, layers)
    assert 4 * raw < needed < 5 * raw + 20e6
    finer = Grid(-180.0, 90.0, 0.125, 0.125, 1440, 2880)
    assert needed_bytes(finer, layers) == pytest.approx(4 * needed, rel=0.2)
    assert needed_bytes(grid, ["tilt"]) < needed_bytes(grid, ["monthly_rejected_flux"])


def test_no_room_is_told_beforehand(tmp_path: Path) -> None:
    output = tmp_path / "not" / "yet"
    require_space(output, 1)
    with pytest.raises(OutputError, match=r"GB free and this run needs up to 1000000000\.00 GB"):
        require_space(output, 10**18)
    assert not output.exists()
