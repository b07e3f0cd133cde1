"""Colour ramps: order by lightness, also for colour-blind eyes and on grey paper."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from gridcool.products.ramps import CYCLIC, DIVERGING, RAMPS, class_colours, paler, ramp, srgb
from gridcool.variables import layer_variables

# Machado, Oliveira & Fernandes (2009), IEEE Trans. Vis. Comput. Graph. 15, severity 1, linear RGB;
# FROM MEMORY.
BLINDNESS = {
    "protan": [
        [0.152286, 1.052583, -0.204868],
        [0.114503, 0.786281, 0.099216],
        [-0.003882, -0.048116, 1.051998],
    ],
    "deutan": [
        [0.367322, 0.860646, -0.227968],
        [0.280085, 0.672501, 0.047413],
        [-0.011820, 0.042940, 0.968881],
    ],
    "tritan": [
        [1.255528, -0.076749, -0.178779],
        [-0.078411, 0.930809, 0.147602],
        [0.004733, 0.691367, 0.303900],
    ],
}
SEQUENTIAL = [name for name in RAMPS if name not in (*CYCLIC, *DIVERGING)]


def linear(colours: object) -> np.ndarray:
    shares = np.asarray(colours, float) / 255
    return np.where(shares <= 0.04045, shares / 12.92, ((shares + 0.055) / 1.055) ** 2.4)


def lightness(rgb: np.ndarray) -> np.ndarray:
    """L* of linear RGB."""
    y = np.clip(rgb @ np.array([0.2126, 0.7152, 0.0722]), 0, None)
    return 116 * np.where(y > (6 / 29) ** 3, np.cbrt(y), y / (3 * (6 / 29) ** 2) + 4 / 29) - 16


def test_every_layer_has_a_ramp() -> None:
    named = {layer.ramp for layer in layer_variables().values()}
    assert named - {"flags", "classes"} <= set(RAMPS)
    with pytest.raises(KeyError):
        ramp("flags")


@pytest.mark.parametrize("name", SEQUENTIAL)
@pytest.mark.parametrize("eye", ["usual", *BLINDNESS])
def test_lightness_rises_or_falls(name: str, eye: str) -> None:
    colours = linear(RAMPS[name].colours(11))
    seen = colours if eye == "usual" else np.clip(colours @ np.array(BLINDNESS[eye]).T, 0, 1)
    steps = np.diff(lightness(seen))
    assert (steps > 2).all() or (steps < -2).all()


@pytest.mark.parametrize("eye", ["usual", *BLINDNESS])
def test_both_sides_of_a_difference_are_told_apart(eye: str) -> None:
    colours = linear(RAMPS["difference"].colours(11))
    seen = colours if eye == "usual" else np.clip(colours @ np.array(BLINDNESS[eye]).T, 0, 1)
    light = lightness(seen)
    assert (np.diff(light[:6]) > 2).all()
    assert (np.diff(light[5:]) < -2).all()
    low, high = np.cbrt(seen[1]), np.cbrt(seen[-2])
    assert np.abs(low - high).max() > 0.15


@pytest.mark.parametrize("name", CYCLIC)
@pytest.mark.parametrize("eye", ["usual", *BLINDNESS])
def test_both_ways_round_are_told_apart(name: str, eye: str) -> None:
    """East is as light as west, spring as autumn: hue must do, for colour-blind eyes too.

    Distances in CIE L*a*b*; green against orange, for one, comes to 8 for a protan's eye.
    """
    colours = linear(RAMPS[name].colours(13))
    seen = colours if eye == "usual" else np.clip(colours @ np.array(BLINDNESS[eye]).T, 0, 1)
    to_xyz = np.array(
        [[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]]
    )
    scaled = seen @ to_xyz.T / np.array([0.95047, 1.0, 1.08883])
    low = scaled / (3 * (6 / 29) ** 2) + 4 / 29
    x, y, z = np.where(scaled > (6 / 29) ** 3, np.cbrt(scaled), low).T
    lab = np.stack([116 * y - 16, 500 * (x - y), 200 * (y - z)], axis=1)
    apart = np.linalg.norm(lab - lab[::-1], axis=1)
    assert apart[3] > 60
    assert (apart[1:6] > 20).all()


def test_paler_colours_keep_their_order() -> None:
    colours = RAMPS["flux"].colours(9)
    assert paler(colours, 0.0) == colours
    assert set(paler(colours, 1.0)) == {(255, 255, 255)}
    assert (np.diff(lightness(linear(paler(colours, 0.6)))) < 0).all()


@pytest.mark.parametrize("name", CYCLIC)
def test_cyclic_ramps_close(name: str) -> None:
    colours = RAMPS[name].colours(361)
    assert colours[0] == colours[-1]
    steps = np.abs(np.diff(np.array(colours, int), axis=0)).max()
    assert steps <= 3  # no seam anywhere


def test_known_colours() -> None:
    """White, black and mid grey; sRGB's own red has L* 53.24, a* 80.09, b* 67.20 (from memory)."""
    assert srgb(np.array([100.0, 0, 0])).tolist() == pytest.approx([255, 255, 255], abs=1)
    assert srgb(np.array([0.0, 0, 0])).tolist() == [0, 0, 0]
    assert srgb(np.array([53.585, 0, 0])).tolist() == pytest.approx([128, 128, 128], abs=1)
    assert srgb(np.array([53.24, 80.09, 67.20])).tolist() == pytest.approx([255, 0, 0], abs=2)


@pytest.mark.parametrize("count", [1, 2, 3, 5, 7])
def test_classes_are_told_apart(count: int) -> None:
    colours = class_colours(count)
    assert len(set(colours)) == count
    light = lightness(linear(colours))
    for first, second in itertools.pairwise(light):
        assert first - second > 60 / (count + 1) * 0.6
