"""What is asked of an input, what was found in it, and what is wrong with it."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any, Literal

from gridcool.errors import InputDataError
from gridcool.grid import Bounds


@dataclass(frozen=True)
class InputSpec:
    """One input as the user names it.

    Attributes
    ----------
    name : str
        One of the inputs of ``variables.toml``, or a free name that rules refer to.
    path : Path
        A NetCDF file, a GeoTIFF or a Zarr folder.
    variable, units : str or None
        The variable inside the file and its unit, where the file does not make them plain.
    hours : {"utc", "local-solar"}
        What the hours of an hour axis count.
    divisor_path, divisor_variable : Path, str or None
        If either is given, the input is the ratio of two variables; without a path the divisor
        lies in the same file.
    divisor_minimum : float
        Where the divisor (in its own unit) is smaller, the ratio is missing.
    """

    name: str
    path: Path
    variable: str | None = None
    units: str | None = None
    hours: Literal["utc", "local-solar"] = "utc"
    divisor_path: Path | None = None
    divisor_variable: str | None = None
    divisor_minimum: float = 5.0

    @property
    def is_ratio(self) -> bool:
        """Whether the input is one variable divided by another."""
        return self.divisor_path is not None or self.divisor_variable is not None

    def label(self, variable: str | None = None) -> str:
        """How messages name the input: its name, the file and, once known, the variable."""
        inside = f", variable {variable}" if variable else ""
        return f"{self.name} ({self.path}{inside})"


@dataclass(frozen=True)
class Finding:
    """Something the user should know: an error ends the run, a warning does not."""

    severity: Literal["error", "warning"]
    message: str


@dataclass(frozen=True)
class InputReport:
    """What was understood of one input; fields that could not be filled are empty or None.

    ``minimum``, ``mean`` (weighted by area) and ``maximum`` are in the unit used inside;
    ``missing_share`` is a share of the cells and months looked at.
    """

    name: str
    path: str
    kind: str = ""
    variable: str = ""
    chosen: str = ""
    unit: str = ""
    conversion: str = ""
    rows: int = 0
    columns: int = 0
    grid: str = ""
    bounds: Bounds | None = None
    time: str = ""
    years: int = 0
    calendar: str = ""
    hours: int = 0
    minimum: float | None = None
    mean: float | None = None
    maximum: float | None = None
    missing_share: float | None = None
    regridding: str = ""
    findings: tuple[Finding, ...] = ()

    @property
    def errors(self) -> tuple[str, ...]:
        """Messages of the findings that end a run."""
        return tuple(f.message for f in self.findings if f.severity == "error")

    @property
    def warnings(self) -> tuple[str, ...]:
        """Messages of the findings that do not end a run."""
        return tuple(f.message for f in self.findings if f.severity == "warning")

    def lines(self) -> list[str]:
        """Short aligned lines for a terminal."""
        facts = [("file", f"{self.path}{f' ({self.kind})' if self.kind else ''}")]
        if self.variable:
            facts.append(("variable", f"{self.variable}, {self.chosen}"))
        if self.conversion:
            facts.append(("unit", self.conversion))
        if self.grid:
            facts.append(("grid", self.grid))
        if self.time:
            facts.append(("time", self.time))
        facts += self._value_facts()
        if self.regridding:
            facts.append(("to target", self.regridding))
        facts += [(finding.severity, finding.message) for finding in self.findings]
        return [self.name, *(f"  {key:<10}{text}" for key, text in facts)]

    def _value_facts(self) -> list[tuple[str, str]]:
        if self.missing_share is None:
            return []
        facts = [("missing", f"{100 * self.missing_share:.3g} %")]
        if self.minimum is not None and self.mean is not None and self.maximum is not None:
            unit = "" if self.unit in ("", "1") else f" {self.unit}"
            span = f"{self.minimum:.4g} to {self.maximum:.4g}{unit}, mean {self.mean:.4g}"
            facts.insert(0, ("values", span))
        return facts

    def as_dict(self) -> dict[str, Any]:
        """The same as plain numbers and text, ready for JSON."""
        return asdict(self)


def refuse(reports: tuple[InputReport, ...]) -> None:
    """Stop if any report holds an error.

    Raises
    ------
    InputDataError
        One message that lists every error of every input.
    """
    errors = list(dict.fromkeys(message for report in reports for message in report.errors))
    if len(errors) == 1:
        raise InputDataError(errors[0])
    if errors:
        listed = "\n".join(f"  - {message}" for message in errors)
        raise InputDataError(f"{len(errors)} problems in the inputs:\n{listed}")


@contextmanager
def located(label: str) -> Iterator[None]:
    """Put the input, file and variable in front of a message that was raised without them."""
    try:
        yield
    except InputDataError as problem:
        message = str(problem)
        if message.startswith(label.split(" (")[0] + " ("):
            raise
        raise InputDataError(f"{label}: {message}") from None
