"""The command line: commands and exit codes.

The pipeline and its libraries are loaded only when a command needs them, so that ``--help`` answers
at once.
"""

from __future__ import annotations

import argparse
import importlib
import json
import os
import signal
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from gridcool import __version__
from gridcool.errors import GridcoolError, OutputError
from gridcool.reporting import event, progress_for

EXIT_CODES = """exit codes:
  0  done, or nothing to do
  1  a bug; please report it
  2  wrong use or settings
  3  an input is missing, broken or impossible
  4  another run is active in the same output folder
  5  the product could not be written, or a release is damaged
"""
INTERRUPTED, TERMINATED = 130, 143  # 128 and the number of the signal, as shells have it


class _Terminated(KeyboardInterrupt):
    """The system asked the run to end."""


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command and return its exit code."""
    options = _parser().parse_args(arguments)
    _listen()
    try:
        options.command(options)
        sys.stdout.flush()
    except GridcoolError as problem:
        return _failed(options, str(problem), problem.exit_code)
    except BrokenPipeError:  # the reader of our lines, such as head, has seen enough
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except KeyboardInterrupt as stop:
        code = TERMINATED if isinstance(stop, _Terminated) else INTERRUPTED
        text = "stopped; finished blocks are kept and the last release is untouched."
        return _failed(options, text, code)
    return 0


def _failed(options: argparse.Namespace, text: str, code: int) -> int:
    if getattr(options, "json_lines", False):
        event("failed", exit_code=code, text=text)
    print(f"gridcool: {text}", file=sys.stderr)
    return code


def _listen() -> None:
    """End cleanly when the system asks for it, as with Ctrl-C."""

    def stop(_number: int, _frame: object) -> None:
        raise _Terminated

    try:
        signal.signal(signal.SIGTERM, stop)
    except ValueError:  # not the main thread: whoever called us minds the signals
        return


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

    def command(name: str, action: Any, text: str) -> argparse.ArgumentParser:
        added = commands.add_parser(name, help=text, description=text)
        added.set_defaults(command=action)
        return added

    check = command("check", _check, "open every input and print what was understood")
    screen = command("screen", _screen, "do the whole job and publish a release")
    refresh = command("refresh", _refresh, "publish a new release only if something changed")
    cell = command("cell", _cell, "explain one place: where its light goes, and why")
    for each in (check, screen, refresh, cell):
        each.add_argument("settings", type=Path, help="settings file (TOML)")
    for each in (screen, refresh):
        each.add_argument("--quiet", action="store_true", help="print the summary only")
        each.add_argument("--json-lines", action="store_true", help="print events as JSON lines")
    refresh.add_argument("--dry-run", action="store_true", help="say what would be done, and why")
    cell.add_argument("latitude", type=float, help="degrees north")
    cell.add_argument("longitude", type=float, help="degrees east")
    cell.add_argument("--json", action="store_true", help="print the facts as JSON")
    cell.add_argument("--figure", type=Path, help="also draw them (.png or .svg)")
    compare = command("compare", _compare, "say what changed between two releases or settings")
    compare.add_argument("a", type=Path, help="release folder or settings file")
    compare.add_argument("b", type=Path, help="another of the same kind")
    compare.add_argument("--json", action="store_true", help="print the facts as JSON")
    compare.add_argument("--map", type=Path, help="also draw the change of the flux (.png)")
    compare.add_argument("--quiet", action="store_true", help="no progress")
    verify = command("verify", _verify, "hold every file of a release against its checksum")
    verify.add_argument("release", type=Path, help="release folder, such as OUT/current")
    demo = command("demo", _demo, "write a starter project with invented data")
    demo.add_argument("folder", type=Path, help="a folder that does not exist yet")
    return parser


def _settings(path: Path) -> Any:
    return importlib.import_module("gridcool.config").load_settings(path)


def _check(options: argparse.Namespace) -> None:
    for line in importlib.import_module("gridcool.pipeline").check(_settings(options.settings)):
        print(line)


def _screen(options: argparse.Namespace) -> None:
    settings = _settings(options.settings)
    with progress_for(quiet=options.quiet, json_lines=options.json_lines) as progress:
        result = importlib.import_module("gridcool.pipeline").screen(settings, progress)
    _told(options, result)


def _refresh(options: argparse.Namespace) -> None:
    settings = _settings(options.settings)
    pipeline = importlib.import_module("gridcool.pipeline")
    with progress_for(quiet=options.quiet, json_lines=options.json_lines) as progress:
        result = pipeline.refresh(settings, progress, dry_run=options.dry_run)
    if result.screened is not None:
        _told(options, result.screened)
        return
    if options.json_lines:
        event(
            "done",
            release=None,
            reasons=list(result.reasons),
            blocks=result.blocks,
            to_compute=result.to_compute,
        )
        return
    if not result.reasons:
        print("Nothing to do: inputs, settings and program are those of the current release.")
        return
    print(f"Would compute {result.to_compute} of {result.blocks} blocks and publish a release:")
    for reason in result.reasons:
        print(f"  {reason}")


def _told(options: argparse.Namespace, result: Any) -> None:
    """The summary of a published release."""
    if options.json_lines:
        event(
            "done",
            release=str(result.release),
            blocks=result.blocks,
            computed=result.computed,
        )
        return
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


def _compare(options: argparse.Namespace) -> None:
    comparing = importlib.import_module("gridcool.comparing")
    page = importlib.import_module("gridcool.products.comparison")
    with progress_for(quiet=options.quiet or options.json, json_lines=False) as progress:
        made = comparing.compare(options.a, options.b, progress, options.map)
    if options.json:
        facts = page.comparison_facts(made.found, made.causes)
        print(json.dumps(facts, indent=2, ensure_ascii=False))
        return
    for line in page.comparison_lines(made.found, made.causes):
        print(line)


def _verify(options: argparse.Namespace) -> None:
    problems = importlib.import_module("gridcool.pipeline").verify(options.release)
    if problems:
        raise OutputError(f"{options.release} is damaged: " + " ".join(problems))
    print(f"{options.release} is whole: every file is as it was made.")


def _demo(options: argparse.Namespace) -> None:
    path = importlib.import_module("gridcool.starter").write_starter(options.folder)
    print(f"Wrote a starter project with invented data. Next: gridcool screen {path}")


if __name__ == "__main__":
    sys.exit(main())
