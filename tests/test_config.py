"""Settings: strict, frozen, and every problem named at once with the nearest known key."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from pydantic import ValidationError

from gridcool.config import load_settings, settings_from
from gridcool.errors import SettingsError

CONFIGS = Path(__file__).parents[1] / "configs"
DEMO = Path(__file__).parents[1] / "data_demo" / "gridcool.toml"
INPUTS = {"albedo": {"path": "albedo.nc"}, "cloud_fraction": {"path": "cloud.nc"}}


def refused(source: str = "job.toml", **sections: Any) -> str:
    """The message that refuses these sections beside two usable inputs."""
    with pytest.raises(SettingsError) as caught:
        settings_from({"inputs": INPUTS, **sections}, source=source)
    assert caught.value.exit_code == 2
    return str(caught.value)


@pytest.mark.parametrize("path", [DEMO, *sorted(CONFIGS.glob("*.toml"))], ids=lambda p: p.name)
def test_delivered_settings_are_accepted(path: Path) -> None:
    settings = load_settings(path)
    assert settings.base == path.resolve().parent


def test_defaults() -> None:
    settings = settings_from({"inputs": INPUTS})
    assert settings.panel.reflectance == 0.92
    assert settings.sky.irradiance == "blend"
    assert settings.release.keep == 3
    assert settings.regions is None


@pytest.mark.parametrize(
    ("sections", "words"),
    [
        ({"pannel": {}}, ("Unknown key pannel", "did you mean panel?")),
        ({"panel": {"reflectanse": 0.9}}, ("Unknown key panel.reflectanse", "mean reflectance?")),
        ({"panel": {"xyz": 1}}, ("Unknown key panel.xyz", "known here: reflectance, soiling")),
        ({"sky": {"cloud_wieght": 0.5}}, ("Unknown key sky.cloud_wieght", "mean cloud_weight?")),
        ({"regions": {"boxs": 5.0}}, ("Unknown key regions.boxs", "did you mean boxes?")),
        (
            {"inputs": {**INPUTS, "albedo": {"path": "a.nc", "varible": "alb"}}},
            ("Unknown key inputs.albedo.varible", "did you mean variable?"),
        ),
        (
            {"inputs": {**INPUTS, "elevatoin": {"path": "e.nc"}}},
            ("[inputs.elevatoin]", "did you mean [inputs.elevation]?"),
        ),
        ({"base": "elsewhere"}, ("unknown key base",)),
    ],
)
def test_unknown_keys_are_refused_with_the_nearest_known_one(
    sections: dict[str, Any], words: tuple[str, ...]
) -> None:
    message = refused(**sections)
    for word in ("job.toml", *words):
        assert word in message


def test_the_internal_base_is_never_suggested() -> None:
    assert "base" not in refused(bas={}).removeprefix("job.toml: Unknown key bas")


def test_inputs_of_other_names_are_left_to_the_user() -> None:
    settings = settings_from({"inputs": {**INPUTS, "slope": {"path": "slope.tif"}}})
    assert settings.inputs["slope"].path == "slope.tif"


def test_all_problems_stand_in_one_message() -> None:
    message = refused(
        panel={"reflectance": 1.2, "soiling": "3 %", "mirror": True},
        sky={"irradiance": "cloudy"},
        release={"keep": 0},
        compute={"memory": "plenty"},
        grid={"bounds": [0.0, 0.0, 10.0]},
        pannel={},
    )
    for place in (
        "panel.reflectance",
        "panel.soiling",
        "panel.mirror",
        "sky.irradiance",
        "release.keep",
        "compute.memory",
        "grid.bounds",
        "pannel",
    ):
        assert place in message
    assert "\n" not in message
    assert "'temperature-range'" in message  # what would be right
    assert 'like "2 GB"' in message


def test_all_problems_between_sections_stand_in_one_message() -> None:
    message = refused(
        inputs={"temperature_maximum": {"path": "t.nc"}},
        grid={"like": "albedo"},
        sky={"irradiance": "measured"},
    )
    for words in (
        "[inputs.albedo] is needed",
        "needed together",
        'like = "albedo" is not one of the inputs',
        "needs [inputs.surface_shortwave]",
    ):
        assert words in message


@pytest.mark.parametrize(
    "value", ["0.9", True, float("nan"), float("inf"), -0.1, 1.1, None, [0.9], {"mean": 0.9}]
)
def test_only_a_share_is_a_share(value: Any) -> None:
    message = refused(panel={"reflectance": value})
    assert "panel.reflectance" in message


def test_a_whole_number_may_stand_where_a_fraction_is_wanted() -> None:
    settings = settings_from(
        {"inputs": INPUTS, "panel": {"reflectance": 1}, "grid": {"resolution": 1}}
    )
    assert settings.panel.reflectance == 1.0
    assert isinstance(settings.panel.reflectance, float)
    assert isinstance(settings.grid.resolution, float)


@pytest.mark.parametrize("value", [1.0, True, "3", 0])
def test_only_a_whole_number_counts_releases(value: Any) -> None:
    assert "release.keep" in refused(release={"keep": value})


@pytest.mark.parametrize("sections", [{"panel": 3}, {"inputs": 3}, {"inputs": {"albedo": "a.nc"}}])
def test_a_value_in_place_of_a_section_is_explained(sections: dict[str, Any]) -> None:
    assert "is a section with keys of its own" in refused(**sections)


def test_a_missing_path_is_named() -> None:
    assert "inputs.albedo.path is missing" in refused(inputs={**INPUTS, "albedo": {}})


@pytest.mark.parametrize(
    ("irradiance", "inputs", "needed"),
    [
        ("cloud", {}, "[inputs.cloud_fraction]"),
        ("blend", {"temperature_range": {"path": "t.nc"}}, "[inputs.cloud_fraction]"),
        ("temperature-range", {}, "[inputs.temperature_range]"),
        ("measured", {}, "[inputs.surface_shortwave]"),
    ],
)
def test_irradiance_names_the_input_it_needs(
    irradiance: str, inputs: dict[str, Any], needed: str
) -> None:
    albedo = {"albedo": {"path": "albedo.nc"}}
    message = refused(inputs={**albedo, **inputs}, sky={"irradiance": irradiance})
    assert f'irradiance = "{irradiance}" needs {needed}' in message
    everything = {
        "cloud_fraction": {"path": "c.nc"},
        "temperature_maximum": {"path": "x.nc"},
        "temperature_minimum": {"path": "n.nc"},
        "surface_shortwave": {"path": "s.nc"},
    }
    accepted = settings_from(
        {"inputs": {**albedo, **everything}, "sky": {"irradiance": irradiance}}
    )
    assert accepted.sky.irradiance == irradiance


@pytest.mark.parametrize("given", ["temperature_maximum", "temperature_minimum"])
def test_maximum_and_minimum_come_together(given: str) -> None:
    message = refused(inputs={**INPUTS, given: {"path": "t.nc"}})
    assert "temperature_maximum and temperature_minimum are needed together" in message


@pytest.mark.parametrize(
    ("grid", "words"),
    [
        ({"like": "albdo"}, "is not one of the inputs"),
        ({"like": "albedo", "resolution": 1.0}, "not both"),
        ({"bounds": [0.0, 0.0, 10.0, 10.0]}, "bounds need a resolution"),
        ({"resolution": 1.0, "bounds": [0.0, 10.0, 10.0, 0.0]}, "south below north"),
        ({"resolution": 1.0, "bounds": [0.0, -91.0, 10.0, 0.0]}, "south below north"),
        ({"resolution": 1.0, "bounds": [-180.0, -10.0, 220.0, 10.0]}, "in degrees east"),
        ({"resolution": 1.0, "bounds": [-190.0, -10.0, 20.0, 10.0]}, "in degrees east"),
        ({"resolution": 0.0}, "grid.resolution"),
        ({"resolution": 7.0}, "past the globe; 6.92"),
        ({"resolution": 0.3333}, "past the globe; 0.3333333333333333 fits"),
        ({"resolution": 0.7, "bounds": [0.0, -90.0, 10.0, 0.0]}, "past the globe"),
    ],
)
def test_impossible_grids(grid: dict[str, Any], words: str) -> None:
    assert words in refused(grid=grid)


@pytest.mark.parametrize(
    "grid",
    [
        {"resolution": 0.3333333333333333},
        {"resolution": 0.05},
        {"resolution": 0.7, "bounds": [0.0, -10.0, 10.0, 10.0]},
        {"resolution": 1, "bounds": [170, -10, -170, 10]},
        {"resolution": 1, "bounds": [170, -10, 190, 10]},
        {"resolution": 1, "bounds": [0, -90, 360, 90]},
    ],
)
def test_possible_grids(grid: dict[str, Any]) -> None:
    assert settings_from({"inputs": INPUTS, "grid": grid}).grid.resolution == grid["resolution"]


@pytest.mark.parametrize("regions", [{}, {"path": "d.gpkg", "boxes": 5.0}])
def test_regions_are_polygons_or_boxes(regions: dict[str, Any]) -> None:
    assert "give either path" in refused(regions=regions)


def test_clouds_neither_gain_nor_lose_more_than_all() -> None:
    sky = {"overcast_transmittance": 0.4, "overcast_reflectance": 0.7}
    assert "exceed 1 together" in refused(sky=sky)


def test_paths_start_from_the_folder_of_the_file(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    folder = tmp_path / "project"
    folder.mkdir()
    (folder / "job.toml").write_text(
        '[inputs.albedo]\npath = "a.nc"\n[inputs.cloud_fraction]\npath = "../c.nc"\n'
    )
    monkeypatch.chdir(tmp_path)
    settings = load_settings("project/job.toml")
    monkeypatch.chdir("/")
    assert settings.resolve(settings.inputs["albedo"].path) == folder / "a.nc"
    assert settings.resolve(settings.inputs["cloud_fraction"].path) == tmp_path / "c.nc"
    assert settings.resolve(settings.job.output) == folder / "out"
    assert settings.resolve(str(tmp_path / "x.nc")) == tmp_path / "x.nc"
    monkeypatch.setenv("HOME", str(tmp_path))
    assert settings.resolve("~/y.nc") == tmp_path / "y.nc"


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (None, "does not exist"),
        (b"[panel\nreflectance = 1", "is not valid TOML"),
        (b'[job]\nname = "a"\nname = "b"\n', "is not valid TOML"),
        ("[job]\nname = 'Zürich'\n".encode("latin-1"), "cannot be read"),
        ("folder", "cannot be read"),
    ],
)
def test_files_that_are_no_settings(
    tmp_path: Path, content: bytes | str | None, words: str
) -> None:
    path = tmp_path / "job.toml"
    if isinstance(content, bytes):
        path.write_bytes(content)
    elif content == "folder":
        path.mkdir()
    with pytest.raises(SettingsError, match=words) as caught:
        load_settings(path)
    assert str(path) in str(caught.value)
    assert caught.value.exit_code == 2


def test_settings_cannot_be_changed() -> None:
    settings = settings_from({"inputs": INPUTS})
    with pytest.raises(ValidationError, match="frozen"):
        settings.panel = settings.panel
    with pytest.raises(ValidationError, match="frozen"):
        settings.panel.reflectance = 0.5
    with pytest.raises(ValidationError, match="frozen"):
        settings.inputs["albedo"].path = "other.nc"


CRITERION = {"layer": "rejected_flux", "worst": 40, "best": 160, "weight": 0.6}


def test_planning_sections_take_numbers_and_lists() -> None:
    settings = settings_from(
        {
            "inputs": INPUTS,
            "exclude": [
                {"layer": "slope", "above": 15, "reason": "too steep"},
                {"layer": "cover", "equals": [1, 5], "reason": "water", "missing": "out"},
            ],
            "criterion": [
                CRITERION,
                {"layer": "slope", "worst": [0, 20], "ideal": 5, "weight": 1},
            ],
            "suitability_class": [{"name": "fair", "above": 0.4}, {"name": "good", "above": 0.7}],
            "regions": {"path": "codes.tif", "codes": {"1": "North"}},
            "zones": {"suitability": 0.7, "minimum_area_km2": 50},
            "target": {"rejected_power_tw": 0.1, "panel_km2_per_year": 100},
        }
    )
    assert settings.exclude[0].above == 15.0
    assert settings.exclude[1].equals == [1.0, 5.0]
    assert settings.criterion[0].worst == [40.0]
    assert settings.criterion[1].ideal == 5.0
    assert settings.ranking.top == 3


@pytest.mark.parametrize(
    ("sections", "words"),
    [
        (
            {"exclude": [{"layer": "slope", "abov": 3, "reason": "x"}]},
            ("exclude[1].abov", "did you mean above?"),
        ),
        (
            {"exclude": [{"layer": "slope", "reason": "x"}]},
            ("exclude[1]", "above, below or equals"),
        ),
        ({"criterion": [{**CRITERION, "best": None}]}, ("criterion[1]", "give best, or ideal")),
        ({"criterion": [{**CRITERION, "worst": 160}]}, ("other than best",)),
        (
            {"criterion": [{"layer": "a", "worst": [0, 5], "ideal": 9}]},
            ("ideal lies between the two",),
        ),
        ({"criterion": [{**CRITERION, "weight": 0}]}, ("criterion[1].weight",)),
        ({"zones": {"suitability": 0.5}}, ("[zones] needs at least one [[criterion]]",)),
        (
            {"suitability_class": [{"name": "good", "above": 0.7}]},
            ("[[suitability_class]] needs at least one",),
        ),
        ({"ranking": {"by": "suitability"}}, ("[ranking] by",)),
        ({"target": {"rejected_power_tw": 1.0}}, ("[target] needs [regions]",)),
        (
            {
                "criterion": [CRITERION],
                "suitability_class": [
                    {"name": "good", "above": 0.7},
                    {"name": "fair", "above": 0.4},
                ],
            },
            ("from the lowest limit to the highest",),
        ),
    ],
)
def test_planning_sections_are_checked(sections: dict[str, Any], words: tuple[str, ...]) -> None:
    message = refused(**sections)
    for each in words:
        assert each in message


def test_words_that_no_file_can_hold_are_refused() -> None:
    for reason in ("", "a\x00b", "a\nb", "x" * 300):
        rule = {"layer": "slope", "above": 1, "reason": reason}
        assert "exclude[1].reason" in refused(exclude=[rule])
    many = [{"name": f"class {n}", "above": n / 60} for n in range(51)]
    assert "at most 50" in refused(criterion=[CRITERION], suitability_class=many)
