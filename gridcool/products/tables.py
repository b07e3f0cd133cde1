"""The table of regions as a CSV file that people, scripts and spreadsheets all read alike.

UTF-8 without a byte-order mark, comma-separated, lines ended by CR LF, quoted where needed
(RFC 4180); a point as decimal sign, no exponents, an empty field for what is unknown.

A spreadsheet runs a field that begins with ``=``, ``+``, ``-`` or ``@`` as a formula, quoted or
not. A text that could be taken for one gets an apostrophe in front, which spreadsheets themselves
use to say "this is text". Numbers are left alone. The rule can be undone without doubt:
`read_region_table` removes one apostrophe wherever the rule has put one, so names survive the way
out and back unchanged.
"""

from __future__ import annotations

import csv
import math
import re
from numbers import Integral, Real
from pathlib import Path
from typing import TYPE_CHECKING, Any

from gridcool.products.failure import output_errors

if TYPE_CHECKING:
    import pandas as pd

TEXT_COLUMNS = ("region", "main_exclusion")
COUNT_COLUMNS = ("rank", "rank_low", "rank_high")

# Decimals of what has a usual size: fluxes to a hundredth of a W m-2, angles to a tenth of a
# degree, shares to a hundredth of a percent.
DECIMALS = {
    "eligible_share": 4,
    "rejected_flux_mean": 2,
    "rejected_flux_p10": 2,
    "rejected_flux_p50": 2,
    "rejected_flux_p90": 2,
    "flux_uncertainty": 2,
    "chance_top": 3,
    "tilt": 1,
    "azimuth": 1,
    "suitability_mean": 3,
    "energy_payback_days": 1,
    "low_ray_hours": 1,
}
# Areas, masses, powers and costs span many powers of ten: at least so many digits.
SIGNIFICANT = 6

FORMULA = re.compile(r"'*(\s*[=+\-@＝＋－＠]|[\t\r\n])")
NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")


def write_region_table(frame: pd.DataFrame, path: Path) -> None:
    """Write a table of regions.

    Parameters
    ----------
    frame : pandas.DataFrame
        One row a region, in the order to be written; the index is left out.
    path : Path

    Raises
    ------
    OutputError
        If the file cannot be written.
    ValueError
        If a number is infinite.
    TypeError
        If a value is neither a number nor a text.
    """
    columns = [str(name) for name in frame.columns]
    known = frame.notna().to_numpy()
    with (
        output_errors(path),
        path.open("w", encoding="utf-8", newline="") as file,
    ):
        writer = csv.writer(file, lineterminator="\r\n")
        writer.writerow([guard_text(name) for name in columns])
        for row, is_known in zip(frame.itertuples(index=False, name=None), known, strict=True):
            writer.writerow(
                _field(name, value) if given else ""
                for name, value, given in zip(columns, row, is_known, strict=True)
            )


def read_region_table(path: Path) -> pd.DataFrame:
    """Read back a table that `write_region_table` wrote, names restored.

    Raises
    ------
    OSError
        If the file cannot be read.
    """
    import pandas as pd

    frame = pd.read_csv(path, dtype=str, keep_default_na=False, encoding="utf-8")
    frame.columns = [restore_text(name) for name in frame.columns]
    for name in frame.columns:
        if name in TEXT_COLUMNS:
            frame[name] = frame[name].map(restore_text)
        else:
            frame[name] = pd.to_numeric(frame[name])
    return frame


def guard_text(text: str) -> str:
    """The text, with an apostrophe in front if a spreadsheet could take it for a formula."""
    if FORMULA.match(text) and not NUMBER.fullmatch(text):
        return f"'{text}"
    return text


def restore_text(field: str) -> str:
    """Undo `guard_text`."""
    return field[1:] if field.startswith("'") and FORMULA.match(field) else field


def _field(column: str, value: Any) -> str:
    if isinstance(value, str):
        return guard_text(value)
    if isinstance(value, Integral):
        return str(int(value))
    if not isinstance(value, Real):
        raise TypeError(f"{column} holds {value!r}, neither a number nor a text")
    if math.isinf(value):
        raise ValueError(f"{column} is infinite")
    if column in COUNT_COLUMNS:
        return str(round(float(value)))
    return _decimal(float(value), DECIMALS.get(column))


def _decimal(value: float, decimals: int | None) -> str:
    if decimals is None:
        leading = math.floor(math.log10(abs(value))) + 1 if value else 0
        decimals = max(0, SIGNIFICANT - leading)
        text = f"{value:.{decimals}f}"
        text = text.rstrip("0").rstrip(".") if "." in text else text
    else:
        text = f"{value:.{decimals}f}"
    return text.removeprefix("-") if float(text) == 0 else text
