"""What the README and the reference settings say is what the code does."""

from __future__ import annotations

import tomllib
from pathlib import Path

import pytest

from gridcool.cli import main
from gridcool.config import Settings, load_settings
from gridcool.planning.ranking import COLUMNS
from gridcool.variables import input_variables, layer_variables

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")
SECTIONS = (
    *("job", "sky", "panel", "worth", "uncertainty", "layers", "maps", "suitability"),
    *("ranking", "compute", "release"),
)
UNSET = {"by"}  # keys whose default is that nothing is said


@pytest.mark.parametrize("section", SECTIONS)
def test_reference_settings_show_every_key_with_its_default(section: str) -> None:
    shown = tomllib.loads((ROOT / "configs/reference.toml").read_text(encoding="utf-8"))
    model = Settings.model_fields[section].annotation
    assert model is not None
    assert shown[section] == {k: v for k, v in model().model_dump().items() if k not in UNSET}


def test_reference_settings_load() -> None:
    assert load_settings(ROOT / "configs/reference.toml").grid.like == "albedo"


def test_readme_names_every_input_layer_and_column() -> None:
    names = [*input_variables(), *layer_variables(), *COLUMNS]
    assert [name for name in names if f"`{name}`" not in README] == []


def test_readme_names_every_command(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit):
        main(["--help"])
    shown = capsys.readouterr().out
    for command in ("check", "screen", "refresh", "cell", "compare", "verify", "demo"):
        assert f"    {command} " in shown
        assert f"gridcool {command}" in README


def test_smallest_settings_of_the_readme_are_valid(tmp_path: Path) -> None:
    block = README.split("```toml")[1].split("```")[0]
    path = tmp_path / "smallest.toml"
    path.write_text(block, encoding="utf-8")
    assert set(load_settings(path).inputs) == {"albedo", "cloud_fraction", "temperature_range"}
