"""Every failure that a user can meet, each with its exit code. Imports nothing of ours."""

from __future__ import annotations

from typing import ClassVar


class GridcoolError(Exception):
    """A failure to be shown as one sentence, without a traceback."""

    exit_code: ClassVar[int] = 1


class SettingsError(GridcoolError):
    """The command line or the settings file cannot be understood."""

    exit_code: ClassVar[int] = 2


class InputDataError(GridcoolError):
    """An input file is missing, broken, or holds what it cannot hold."""

    exit_code: ClassVar[int] = 3


class BusyError(GridcoolError):
    """Another run is working in the same output folder."""

    exit_code: ClassVar[int] = 4


class OutputError(GridcoolError):
    """The product cannot be written: no room, no permission, a failed check of what was written."""

    exit_code: ClassVar[int] = 5
