"""The command line: commands, exit codes, progress.

The pipeline and its libraries are loaded only when a command needs them, so that ``--help`` answers
at once.
"""

from __future__ import annotations

import argparse
import importlib
import json
import os
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from gridcool import __version__
from gridcool.errors import GridcoolError

EXIT_CODES = """exit codes:
  0  done, or nothing to do
  1  a bug; please report it
  2  wrong use or settings
  3  an input is missing, broken or impossible
  4  another run is active in the same output folder
  5  the product could not be written
"""


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command and return its exit code."""
    options = _parser().parse_args(arguments)
    try:
        options.command(options)
        sys.stdout.flush()
    except GridcoolError as problem:
        print(f"gridcool: {problem}", file=sys.stderr)
        return problem.exit_code
    except BrokenPipeError:  # the reader of our lines, such as head, has seen enough
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except KeyboardInterrupt:
        print("gridcool: stopped; the last release is untouched.", file=sys.stderr)
        return 130
    return 0


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="gridcool",
        description="Where a ground-mounted reflective panel sends the most sunlight back out of "
        "the atmosphere, and how to tilt it there.",
        epilog=EXIT_CODES,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument("--version", action="version", version=f"gridcool {__version__}")
    commands = parser.add_subparsers(metavar="COMMAND", required=True)
    check = commands.add_parser("check", help="open every input and print what was understood")
    check.set_defaults(command=_check)
    screen = commands.add_parser("screen", help="do the whole job and publish a release")
    screen.set_defaults(command=_screen)
    cell = commands.add_parser("cell", help="explain one place: where its light goes, and why")
    cell.set_defaults(command=_cell)
    for command in (check, screen, cell):
        command.add_argument("settings", type=Path, help="settings file (TOML)")
    screen.add_argument("--quiet", action="store_true", help="print the summary line only")
    cell.add_argument("latitude", type=float, help="degrees north")
    cell.add_argument("longitude", type=float, help="degrees east")
    cell.add_argument("--json", action="store_true", help="print the facts as JSON")
    cell.add_argument("--figure", type=Path, help="also draw them (.png or .svg)")
    return parser


def _pipeline() -> Any:
    return importlib.import_module("gridcool.pipeline")


def _settings(path: Path) -> Any:
    return importlib.import_module("gridcool.config").load_settings(path)


def _check(options: argparse.Namespace) -> None:
    for line in _pipeline().check(_settings(options.settings)):
        print(line)


def _screen(options: argparse.Namespace) -> None:
    settings = _settings(options.settings)
    with _progress(quiet=options.quiet) as progress:
        result = _pipeline().screen(settings, progress)
    for line in result.summary(top=5):
        print(line)


def _cell(options: argparse.Namespace) -> None:
    place = importlib.import_module("gridcool.place")
    facts = place.cell(_settings(options.settings), options.latitude, options.longitude)
    page = importlib.import_module("gridcool.products.cell")
    if options.figure is not None:
        page.draw_cell(facts, options.figure)
    if options.json:
        print(json.dumps(facts, indent=2, ensure_ascii=False))
        return
    for line in page.cell_lines(facts):
        print(line)


class _Lines:
    """Progress as plain lines on standard error, for logs and pipes."""

    def __enter__(self) -> _Lines:
        return self

    def __exit__(self, *_: object) -> None:
        return None

    def stage(self, text: str) -> None:
        print(f"gridcool: {text}", file=sys.stderr, flush=True)

    def advance(self, done: int, total: int) -> None:
        """Plain lines tell the stages only."""


class _Silent(_Lines):
    """No progress at all."""

    def stage(self, text: str) -> None:
        """Say nothing."""


class _Bar(_Lines):
    """A progress bar on a terminal."""

    def __init__(self) -> None:
        rich = importlib.import_module("rich.progress")
        console = importlib.import_module("rich.console").Console(stderr=True)
        self._escape = importlib.import_module("rich.markup").escape
        self._bar = rich.Progress(console=console, transient=True)
        self._task = self._bar.add_task("", total=None)

    def __enter__(self) -> _Bar:
        self._bar.start()
        return self

    def __exit__(self, *_: object) -> None:
        self._bar.stop()

    def stage(self, text: str) -> None:
        # Brackets in a text, such as those of a settings key, are no markup.
        self._bar.console.print(text, highlight=False, markup=False, soft_wrap=True)
        self._bar.reset(self._task, description=self._escape(text), total=None)

    def advance(self, done: int, total: int) -> None:
        self._bar.update(self._task, completed=done, total=total)


def _progress(*, quiet: bool) -> _Lines:
    if quiet:
        return _Silent()
    return _Bar() if sys.stderr.isatty() else _Lines()


if __name__ == "__main__":
    sys.exit(main())
