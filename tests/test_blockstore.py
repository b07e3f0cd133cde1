"""The block store on a real disk: whole blocks or none, damage noticed."""

from __future__ import annotations

import logging
import multiprocessing
import os
import signal
import time
from pathlib import Path

import numpy as np
import pytest

from gridcool.errors import OutputError
from gridcool.release.blockstore import BlockStore

KEY = "ab" + "0" * 62
OTHER = "cd" + "1" * 62
VALUES = np.arange(24, dtype=np.float32).reshape(2, 3, 4)


def file_of(store: BlockStore, key: str) -> Path:
    found = [path for path in store.folder.rglob("*") if path.name.startswith(key)]
    assert len(found) == 1
    return found[0]


def test_what_is_kept_comes_back(tmp_path: Path) -> None:
    store = BlockStore(tmp_path / "blocks")
    assert not store.holds(KEY)
    values = VALUES.copy()
    values[0, 0, 0] = np.nan
    store.keep(KEY, values)
    assert store.holds(KEY)
    assert not store.holds(OTHER)
    np.testing.assert_array_equal(store.read(KEY), values)
    assert BlockStore(tmp_path / "blocks").holds(KEY)


@pytest.mark.parametrize("position", [0, 20, 40, 130, 256, 300, -1])
def test_a_flipped_bit_is_noticed(
    tmp_path: Path, position: int, caplog: pytest.LogCaptureFixture
) -> None:
    store = BlockStore(tmp_path)
    store.keep(KEY, VALUES)
    path = file_of(store, KEY)
    content = bytearray(path.read_bytes())
    content[position] ^= 0x10
    path.write_bytes(content)
    with caplog.at_level(logging.WARNING):
        held = store.holds(KEY)
    assert not held
    assert "damaged" in caplog.text
    assert not path.exists()


@pytest.mark.parametrize("length", [0, 10, 255, 256, 300])
def test_a_block_cut_short_is_noticed(tmp_path: Path, length: int) -> None:
    store = BlockStore(tmp_path)
    store.keep(KEY, VALUES)
    path = file_of(store, KEY)
    path.write_bytes(path.read_bytes()[:length])
    with pytest.raises(OutputError, match="damaged"):
        store.read(KEY)
    assert not store.holds(KEY)


def test_a_block_that_went_is_told(tmp_path: Path) -> None:
    with pytest.raises(OutputError, match="cannot be read"):
        BlockStore(tmp_path).read(KEY)


def test_only_the_wanted_stay(tmp_path: Path) -> None:
    store = BlockStore(tmp_path)
    store.keep(KEY, VALUES)
    store.keep(OTHER, VALUES)
    (tmp_path / "ab" / f".{KEY}-dead").write_bytes(b"left by a killed run")
    assert store.keep_only([KEY]) == 2
    assert store.holds(KEY)
    assert not store.holds(OTHER)
    assert len([p for p in tmp_path.rglob("*") if p.is_file()]) == 1


def write_for_ever(folder: Path) -> None:
    big = np.ones((40, 500, 500), np.float32)
    while True:
        BlockStore(folder).keep(KEY, big)


def test_a_killed_writer_leaves_whole_blocks(tmp_path: Path) -> None:
    context = multiprocessing.get_context("spawn")
    for pause in (0.0, 0.01, 0.05):
        writer = context.Process(target=write_for_ever, args=(tmp_path,))
        writer.start()
        until = time.monotonic() + 60
        while not list(tmp_path.rglob("*")) and time.monotonic() < until:
            time.sleep(0.005)
        time.sleep(pause)
        os.kill(writer.pid or 0, signal.SIGKILL)
        writer.join()
        store = BlockStore(tmp_path)
        if any(not path.name.startswith(".") and path.is_file() for path in tmp_path.rglob("*")):
            assert store.holds(KEY)
            assert store.read(KEY).all()


def test_a_disk_that_refuses(tmp_path: Path) -> None:
    blocked = tmp_path / "blocked"
    blocked.write_text("a file where the folder should be")
    with pytest.raises(OutputError, match="cannot be kept"):
        BlockStore(blocked).keep(KEY, VALUES)
