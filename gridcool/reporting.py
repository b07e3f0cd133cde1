"""How a run tells what it does: a bar on a terminal, plain lines in a log, or JSON lines."""

from __future__ import annotations

import importlib
import json
import sys
import time
from datetime import UTC, datetime
from typing import Any

SECONDS_BETWEEN = 1.0  # of progress events in JSON


class Lines:
    """Progress as plain lines on standard error, for logs and pipes."""

    def __enter__(self) -> Lines:
        return self

    def __exit__(self, *_: object) -> None:
        return None

    def stage(self, text: str) -> None:
        """A new stage begins."""
        print(f"gridcool: {text}", file=sys.stderr, flush=True)

    def advance(self, done: int, total: int) -> None:
        """Plain lines tell the stages only."""


class Silent(Lines):
    """No progress at all."""

    def stage(self, text: str) -> None:
        """Say nothing."""


class JsonLines(Lines):
    """Every event as a line of JSON on standard output."""

    def __init__(self) -> None:
        self._last = 0.0

    def stage(self, text: str) -> None:
        """A new stage begins."""
        event("stage", text=text)

    def advance(self, done: int, total: int) -> None:
        """So many of so many steps are done; told about once a second."""
        now = time.monotonic()
        if done == total or now - self._last >= SECONDS_BETWEEN:
            self._last = now
            event("progress", done=done, total=total)


class Bar(Lines):
    """A progress bar on a terminal."""

    def __init__(self) -> None:
        rich = importlib.import_module("rich.progress")
        console = importlib.import_module("rich.console").Console(stderr=True)
        self._escape = importlib.import_module("rich.markup").escape
        self._bar = rich.Progress(console=console, transient=True)
        self._task = self._bar.add_task("", total=None)

    def __enter__(self) -> Bar:
        self._bar.start()
        return self

    def __exit__(self, *_: object) -> None:
        self._bar.stop()

    def stage(self, text: str) -> None:
        """A new stage begins."""
        # Brackets in a text, such as those of a settings key, are no markup.
        self._bar.console.print(text, highlight=False, markup=False, soft_wrap=True)
        self._bar.reset(self._task, description=self._escape(text), total=None)

    def advance(self, done: int, total: int) -> None:
        """So many of so many steps are done."""
        self._bar.update(self._task, completed=done, total=total)


def event(kind: str, **facts: Any) -> None:
    """One line of JSON with the time and what happened."""
    now = f"{datetime.now(UTC):%Y-%m-%dT%H:%M:%S.%fZ}"
    print(json.dumps({"time": now, "event": kind, **facts}, ensure_ascii=False), flush=True)


def progress_for(*, quiet: bool, json_lines: bool) -> Lines:
    """The way to report that fits the options and where standard error goes."""
    if json_lines:
        return JsonLines()
    if quiet:
        return Silent()
    return Bar() if sys.stderr.isatty() else Lines()
