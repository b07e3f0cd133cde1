"""The declared table of inputs and layers is consistent."""

from __future__ import annotations

import re
from typing import Any

import pytest
from cf_units import Unit
from hypothesis import given
from hypothesis import strategies as st

from gridcool.variables import (
    InputVariable,
    LayerVariable,
    engine_layers,
    flag_value,
    flag_words,
    input_variables,
    layer_variables,
)

INPUTS = list(input_variables().values())
LAYERS = list(layer_variables().values())
#: Layers that other people's maps and scripts depend on; more may come, none may go.
FIXED_LAYERS = {
    "rejected_flux": "W m-2",
    "monthly_rejected_flux": "W m-2",
    "rejected_flux_flat": "W m-2",
    "orientation_gain": "1",
    "tilt": "degree",
    "azimuth": "degree",
    "escape_fraction": "1",
    "surface_shortwave": "W m-2",
    "monthly_surface_shortwave": "W m-2",
    "equivalent_cloud_fraction": "1",
    "flux_uncertainty": "W m-2",
    "seasonal_gain": "1",
    "seasonal_tilt": "degree",
    "low_ray_hours": "h yr-1",
    "daytime_cooling": "K",
    "co2e_standing": "kg m-2",
    "co2e_100yr": "kg m-2 yr-1",
}


def name_of(variable: Any) -> str:
    return variable.name


def test_fixed_layers_keep_name_and_unit() -> None:
    found = {layer.name: layer.units for layer in LAYERS}
    assert found.items() >= FIXED_LAYERS.items()
    assert "input_quality" in found


@pytest.mark.parametrize("variable", INPUTS, ids=name_of)
def test_inputs(variable: InputVariable) -> None:
    assert variable.long_name
    assert variable.time in ("month", "none")
    low, high = variable.valid
    assert low <= variable.usual[0] < variable.usual[1] <= high
    assert variable.name in variable.names
    assert len(set(variable.names)) == len(variable.names)


@pytest.mark.parametrize("variable", [v for v in INPUTS if v.units != "DU"], ids=name_of)
def test_units_of_inputs_can_be_converted(variable: InputVariable) -> None:
    """Dobson units are the trade's own and no unit of UDUNITS; the reader knows them."""
    assert not Unit(variable.units).is_unknown()


def test_a_usual_name_means_one_input() -> None:
    """Except air temperature, whose maximum and minimum may both be called by the CF name."""
    names = [name for variable in INPUTS for name in variable.names]
    assert len(set(names)) == len(names)
    standard = [v.standard_name for v in INPUTS if v.standard_name]
    assert {name for name in standard if standard.count(name) > 1} == {"air_temperature"}


def test_only_the_diurnal_range_is_a_difference() -> None:
    """A range of 10 K is 10 °C; a temperature of 10 K is not."""
    assert [v.name for v in INPUTS if v.difference] == ["temperature_range"]
    assert Unit(input_variables()["temperature_maximum"].units) == Unit("degC")


@pytest.mark.parametrize("layer", LAYERS, ids=name_of)
def test_layers(layer: LayerVariable) -> None:
    assert layer.long_name
    assert layer.ramp
    assert layer.count == {"year": 1, "season": 2, "month": 12}[layer.bands]
    bands = (layer.bands,) if layer.count > 1 else ()
    assert layer.dimensions == (*bands, "latitude", "longitude")
    assert re.fullmatch(r"[a-z][a-z0-9_]*", layer.name)
    assert layer.is_whole == (layer.units == "")
    if not layer.is_whole:
        assert not Unit(layer.units).is_unknown()


@pytest.mark.parametrize("layer", [each for each in LAYERS if each.is_flags], ids=name_of)
def test_flags_are_distinct_bits_that_fit_sixteen(layer: LayerVariable) -> None:
    values = [flag.value for flag in layer.flags]
    assert all(value > 0 and value & (value - 1) == 0 for value in values)
    assert len(set(values)) == len(values)
    assert sum(values) < 2**16
    meanings = [flag.meaning for flag in layer.flags]
    assert len(set(meanings)) == len(meanings)
    # CF lists flag meanings in one attribute, parted by blanks.
    assert all(re.fullmatch(r"[A-Za-z0-9_.+@-]+", meaning) for meaning in meanings)
    assert all(flag.description for flag in layer.flags)
    assert [flag_value(layer.name, meaning) for meaning in meanings] == values


@pytest.mark.parametrize("layer", [each for each in LAYERS if each.classes], ids=name_of)
def test_classes_count_up_from_none(layer: LayerVariable) -> None:
    assert [each.value for each in layer.classes] == list(range(len(layer.classes)))
    assert layer.classes[0].meaning == "none"
    assert not layer.flags


def test_the_engine_is_not_asked_for_what_planning_makes() -> None:
    planned = {"exclusion", "suitability", "suitability_uncertainty", "suitability_class"}
    assert {layer.name for layer in LAYERS} - set(engine_layers()) == planned


def test_words_of_flags_are_legal_and_used_once() -> None:
    texts = ["very good!", "Very-good", "水", "none", "very good 2", "A, B\nand C"]
    words = flag_words(texts, "class", ["none"])
    assert words == [
        *("very_good", "very_good_2", "class_3", "none_4", "very_good_2_5", "a_b_and_c")
    ]


@given(st.lists(st.text(), max_size=15))
def test_words_of_any_texts(texts: list[str]) -> None:
    words = flag_words(texts, "rule", ["no_result"])
    assert len({*words, "no_result"}) == len(texts) + 1
    assert all(re.fullmatch(r"[a-z0-9_]+", word) for word in words)


def test_unknown_flags_are_no_flags() -> None:
    with pytest.raises(KeyError, match="frost"):
        flag_value("input_quality", "frost")
    with pytest.raises(KeyError):
        flag_value("tilt", "from_cloud")


def test_the_table_cannot_be_changed() -> None:
    with pytest.raises(TypeError):
        layer_variables()["tilt"] = layer_variables()["azimuth"]  # type: ignore[index]
    with pytest.raises(AttributeError):
        input_variables()["albedo"].units = "%"  # type: ignore[misc]
