"""The table of regions: what is written is what is read, by people, scripts and spreadsheets."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gridcool.errors import OutputError
from gridcool.products.tables import (
    guard_text,
    read_region_table,
    restore_text,
    write_region_table,
)

NAMES = [
    'Upper "Quoted" Vale',
    "Comma, Saint",
    "Two\nLines",
    "Carriage\r\nReturn",
    "=cmd|'/c calc'!A1",
    "+1-800",
    "-north",
    "@home",
    "\ttab",
    "'=already",
    "Ängermühle–東",
    "NA",
    "null",
    "",
    "'tis",
    "-5",
]


def table() -> pd.DataFrame:
    count = len(NAMES)
    return pd.DataFrame(
        {
            "rank": np.arange(1, count + 1),
            "region": NAMES,
            "area_km2": np.geomspace(0.0123456789, 5.1e8, count),
            "eligible_share": np.linspace(0, 1, count),
            "rejected_flux_mean": np.linspace(-1.23456, 160.98765, count),
            "azimuth": [np.nan, *np.linspace(0, 359.96, count - 1)],
            "panel_mass_mt": np.geomspace(1e-9, 1e12, count),
            "main_exclusion": [None, *["too steep"] * (count - 1)],
        }
    )


def rows_of(path: Path) -> list[list[str]]:
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.reader(file, strict=True))


def test_round_trip(tmp_path: Path) -> None:
    frame = table()
    write_region_table(frame, tmp_path / "regions.csv")
    back = read_region_table(tmp_path / "regions.csv")
    assert list(back.columns) == list(frame.columns)
    assert list(back["region"]) == NAMES
    assert list(back["rank"]) == list(frame["rank"])
    np.testing.assert_allclose(back["area_km2"], frame["area_km2"], rtol=1e-5)
    np.testing.assert_allclose(back["panel_mass_mt"], frame["panel_mass_mt"], rtol=1e-5)
    np.testing.assert_allclose(back["azimuth"], frame["azimuth"], atol=0.05)
    assert back["main_exclusion"][0] == ""


def test_bytes_follow_the_standard(tmp_path: Path) -> None:
    """RFC 4180: CR LF after every record, double quotes doubled; UTF-8 without a mark."""
    frame = pd.DataFrame({"rank": [1], "region": ['a "b", c'], "tilt": [np.nan]})
    write_region_table(frame, tmp_path / "t.csv")
    assert (tmp_path / "t.csv").read_bytes() == b'rank,region,tilt\r\n1,"a ""b"", c",\r\n'


def test_no_text_starts_a_formula(tmp_path: Path) -> None:
    write_region_table(table(), tmp_path / "t.csv")
    for row in rows_of(tmp_path / "t.csv")[1:]:
        for field in (row[1], row[-1]):
            assert not field.strip().startswith(("=", "+", "@"))
            assert not field.startswith(("\t", "\r", "\n"))
            assert not field.startswith("-") or field == "-5"


def test_numbers_are_for_readers(tmp_path: Path) -> None:
    frame = pd.DataFrame(
        {
            "rank": [1.0, np.nan],
            "area_km2": [1234567.89, 0.00123456789],
            "eligible_share": [0.123456, 1.0],
            "rejected_flux_mean": [123.456, -0.001],
            "tilt": [12.34, 0.0],
            "rejected_power_tw": [1e-7, 0.0],
            "panel_mass_mt": [5.0, 123.0],
        }
    )
    write_region_table(frame, tmp_path / "t.csv")
    assert rows_of(tmp_path / "t.csv")[1:] == [
        ["1", "1234568", "0.1235", "123.46", "12.3", "0.0000001", "5"],
        ["", "0.00123457", "1.0000", "0.00", "0.0", "0", "123"],
    ]


@given(st.text(st.characters(exclude_categories=("Cs",))))
def test_guarding_can_be_undone(text: str) -> None:
    guarded = guard_text(text)
    assert restore_text(guarded) == text
    assert guarded in (text, f"'{text}")


@given(
    st.sampled_from("=+-@＝＋－＠"), st.text(st.sampled_from("ab1(")), st.sampled_from(["", " "])
)
def test_every_formula_is_guarded(sign: str, rest: str, space: str) -> None:
    text = f"{space}{sign}x{rest}"
    assert guard_text(text) == f"'{text}"


@given(st.floats(-1e12, 1e12))
def test_plain_numbers_are_no_formulas(number: float) -> None:
    assert guard_text(f"{number!r}") == f"{number!r}"


def test_infinite_numbers_and_strange_things_are_refused(tmp_path: Path) -> None:
    with pytest.raises(ValueError, match="area_km2 is infinite"):
        write_region_table(pd.DataFrame({"area_km2": [np.inf]}), tmp_path / "t.csv")
    with pytest.raises(TypeError, match="neither a number nor a text"):
        write_region_table(pd.DataFrame({"region": [["list"]]}), tmp_path / "t.csv")


def test_a_folder_that_is_not_there_is_told(tmp_path: Path) -> None:
    with pytest.raises(OutputError, match=r"regions\.csv could not be written"):
        write_region_table(table(), tmp_path / "absent" / "regions.csv")
