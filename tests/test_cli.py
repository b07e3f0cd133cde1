"""The command line: help, exit codes, one line for a failure, progress that suits its reader."""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest

from gridcool import __version__, pipeline
from gridcool.cli import main
from gridcool.errors import (
    BusyError,
    GridcoolError,
    InputDataError,
    OutputError,
    SettingsError,
)

DEMO = str(Path(__file__).parents[1] / "data_demo" / "gridcool.toml")
FAILURES: list[tuple[type[GridcoolError], int]] = [
    (SettingsError, 2),
    (InputDataError, 3),
    (BusyError, 4),
    (OutputError, 5),
]


class Result:
    """Stands for what a run publishes."""

    def summary(self, top: int) -> Iterator[str]:
        yield f"Results: here, the first {top}"


def run_to_the_end(_settings: Any, progress: Any) -> Result:
    progress.stage("Reading the inputs")
    progress.advance(1, 2)
    progress.stage("warning: [odd] values")
    return Result()


def failing(problem: BaseException) -> Callable[..., Any]:
    def command(*_: object, **__: object) -> Any:
        raise problem

    return command


def exit_code(*arguments: str) -> int | str | None:
    """The code with which the argument parser ends the program."""
    with pytest.raises(SystemExit) as end:
        main(arguments)
    return end.value.code


def test_help_lists_commands_and_exit_codes(capsys: pytest.CaptureFixture[str]) -> None:
    assert exit_code("--help") == 0
    told = capsys.readouterr().out
    for command in ("check", "screen"):
        assert command in told
    for code in range(6):
        assert f"\n  {code}  " in told
    assert __version__ not in told


@pytest.mark.parametrize("command", ["check", "screen"])
def test_each_command_explains_itself(command: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert exit_code(command, "--help") == 0
    assert "settings file (TOML)" in capsys.readouterr().out


def test_version(capsys: pytest.CaptureFixture[str]) -> None:
    assert exit_code("--version") == 0
    assert capsys.readouterr().out == f"gridcool {__version__}\n"


@pytest.mark.parametrize(
    "arguments", [["publish"], [], ["screen"], ["screen", DEMO, "--fast"], ["check", DEMO, "more"]]
)
def test_wrong_use_ends_with_2(arguments: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    assert exit_code(*arguments) == 2
    told = capsys.readouterr()
    assert told.out == ""
    assert told.err.startswith("usage: gridcool")


@pytest.mark.parametrize("command", ["check", "screen"])
@pytest.mark.parametrize(("kind", "code"), FAILURES)
def test_a_known_failure_is_one_line_and_its_own_code(
    command: str,
    kind: type[GridcoolError],
    code: int,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    monkeypatch.setattr(pipeline, command, failing(kind("The albedo is blue; repaint it.")))
    assert main([command, DEMO]) == code
    told = capsys.readouterr()
    assert told.out == ""
    assert told.err == "gridcool: The albedo is blue; repaint it.\n"


def test_a_bug_is_not_hidden(monkeypatch: pytest.MonkeyPatch) -> None:
    """It keeps its traceback, and Python ends with 1."""
    monkeypatch.setattr(pipeline, "screen", failing(ZeroDivisionError("by nought")))
    with pytest.raises(ZeroDivisionError):
        main(["screen", DEMO])


def test_stopping_a_run_says_so(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr(pipeline, "screen", failing(KeyboardInterrupt()))
    assert main(["screen", DEMO]) == 130
    told = "gridcool: stopped; finished blocks are kept and the last release is untouched.\n"
    assert capsys.readouterr().err == told


def test_check_prints_its_lines(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr(pipeline, "check", lambda _settings: iter(["albedo", "  unit 1"]))
    assert main(["check", DEMO]) == 0
    assert capsys.readouterr() == ("albedo\n  unit 1\n", "")


def test_check_prints_what_it_understood_before_it_fails(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    def check(_settings: Any) -> Iterator[str]:
        yield "albedo"
        raise InputDataError("One thing is wrong.")

    monkeypatch.setattr(pipeline, "check", check)
    assert main(["check", DEMO]) == 3
    assert capsys.readouterr() == ("albedo\n", "gridcool: One thing is wrong.\n")


def test_progress_is_plain_lines_away_from_a_terminal(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr(pipeline, "screen", run_to_the_end)
    assert main(["screen", DEMO]) == 0
    told = capsys.readouterr()
    assert told.out == "Results: here, the first 5\n"
    assert told.err == "gridcool: Reading the inputs\ngridcool: warning: [odd] values\n"


def test_quiet_tells_the_results_only(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr(pipeline, "screen", run_to_the_end)
    assert main(["screen", DEMO, "--quiet"]) == 0
    assert capsys.readouterr() == ("Results: here, the first 5\n", "")


def test_a_terminal_gets_a_bar_and_every_word(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr(pipeline, "screen", run_to_the_end)
    monkeypatch.setattr(sys.stderr, "isatty", lambda: True)
    monkeypatch.setenv("TERM", "xterm")
    assert main(["screen", DEMO]) == 0
    told = capsys.readouterr()
    assert told.out == "Results: here, the first 5\n"
    assert "Reading the inputs" in told.err
    assert "warning: [odd] values" in told.err  # brackets are no markup
    assert "\x1b[" in told.err


def test_missing_inputs_end_with_3(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    settings = tmp_path / "job.toml"
    settings.write_text(
        '[inputs.albedo]\npath = "no.nc"\n[inputs.cloud_fraction]\npath = "none.nc"\n'
    )
    assert main(["screen", str(settings), "--quiet"]) == 3
    told = capsys.readouterr()
    assert told.out == ""
    assert told.err.startswith("gridcool: ")
    assert "no.nc" in told.err
    assert not (tmp_path / "out" / "releases").exists()  # only the folder of the lock is there


@pytest.mark.parametrize("command", ["check", "screen"])
def test_from_outside_a_failure_has_no_traceback(command: str, tmp_path: Path) -> None:
    outcome = subprocess.run(
        [sys.executable, "-m", "gridcool", command, str(tmp_path / "missing.toml")],
        capture_output=True,
        text=True,
        check=False,
        timeout=60,
    )
    assert outcome.returncode == 2
    assert outcome.stdout == ""
    assert outcome.stderr.count("\n") == 1
    assert outcome.stderr.startswith("gridcool: Settings file ")
