"""Failures: each class has an exit code of its own."""

from __future__ import annotations

import pytest

from gridcool import errors
from gridcool.errors import (
    BusyError,
    GridcoolError,
    InputDataError,
    OutputError,
    SettingsError,
)

EXIT_CODES = {SettingsError: 2, InputDataError: 3, BusyError: 4, OutputError: 5}


@pytest.mark.parametrize(("kind", "code"), EXIT_CODES.items())
def test_exit_codes_are_the_documented_ones(kind: type[GridcoolError], code: int) -> None:
    assert kind.exit_code == code
    assert issubclass(kind, GridcoolError)
    assert str(kind("One sentence.")) == "One sentence."


def test_no_two_failures_share_an_exit_code() -> None:
    """A failure of unknown kind counts as a bug (1); success (0) belongs to none."""
    classes = [each for each in vars(errors).values() if isinstance(each, type)]
    failures = [each for each in classes if issubclass(each, GridcoolError)]
    assert set(failures) == {GridcoolError, *EXIT_CODES}
    assert sorted(each.exit_code for each in failures) == [1, 2, 3, 4, 5]
    assert all("exit_code" in vars(each) for each in failures)
