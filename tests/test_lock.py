"""One run at a time: who holds the lock, and that a killed holder leaves none."""

from __future__ import annotations

import multiprocessing
import os
import signal
import time
from multiprocessing.synchronize import Event
from pathlib import Path

import pytest

from gridcool.errors import BusyError, OutputError
from gridcool.release.lock import HOLDER, output_lock
from gridcool.release.publish import WORK


def hold(output: Path, held: Event) -> None:
    with output_lock(output):
        held.set()
        time.sleep(60)


@pytest.fixture
def holder(tmp_path: Path) -> multiprocessing.process.BaseProcess:
    context = multiprocessing.get_context("spawn")
    held = context.Event()
    process = context.Process(target=hold, args=(tmp_path / "out", held))
    process.start()
    assert held.wait(60)
    yield process  # type: ignore[misc]
    process.kill()
    process.join()


def test_the_second_is_turned_away_at_once(
    holder: multiprocessing.process.BaseProcess, tmp_path: Path
) -> None:
    for _ in range(10):
        with pytest.raises(BusyError) as refused, output_lock(tmp_path / "out"):
            pass
        assert refused.value.exit_code == 4
        assert f"process {holder.pid}" in str(refused.value)
        assert " since " in str(refused.value)


def test_a_killed_holder_leaves_no_lock(
    holder: multiprocessing.process.BaseProcess, tmp_path: Path
) -> None:
    os.kill(holder.pid or 0, signal.SIGKILL)
    holder.join()
    with output_lock(tmp_path / "out"):
        assert (tmp_path / "out" / WORK / HOLDER).exists()
    assert not (tmp_path / "out" / WORK / HOLDER).exists()


def test_it_can_be_taken_again_and_elsewhere(tmp_path: Path) -> None:
    for _ in range(3):
        with output_lock(tmp_path / "a"), output_lock(tmp_path / "b"):
            pass


def test_a_failed_run_gives_it_back(tmp_path: Path) -> None:
    with pytest.raises(ValueError, match="inside"), output_lock(tmp_path):
        raise ValueError("inside")
    with output_lock(tmp_path):
        pass


def test_a_folder_that_cannot_be_made(tmp_path: Path) -> None:
    (tmp_path / "out").write_text("a file")
    with pytest.raises(OutputError, match="cannot be locked"), output_lock(tmp_path / "out"):
        pass
