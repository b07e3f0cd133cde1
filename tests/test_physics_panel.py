"""Geometry of the reflector against book examples and exact optics."""

from __future__ import annotations

import book_sun
import numpy as np
import pytest
import reference_tables as tables
from hypothesis import given
from hypothesis import strategies as st

from gridcool.physics import panel, sun

TILTS = st.floats(0.0, np.pi / 2)
AZIMUTHS = st.floats(0.0, 2 * np.pi)
ELEVATIONS = st.floats(0.0, np.pi / 2)


def ray(elevation: float, azimuth: float) -> panel.Vector:
    """Unit vector at an elevation and compass azimuth, radians."""
    return (
        np.asarray(np.cos(elevation) * np.sin(azimuth)),
        np.asarray(np.cos(elevation) * np.cos(azimuth)),
        np.asarray(np.sin(elevation)),
    )


def book_ray(latitude: float, day: int, hour: float) -> panel.Vector:
    """Sun of a book example: Cooper's declination, solar time."""
    return sun.sun_vector(
        latitude=np.radians(latitude),
        declination=book_sun.cooper_declination(day),
        hour_angle=np.radians(15 * (hour - 12)),
    )


def face(tilt: float, azimuth: float) -> panel.Vector:
    """Degrees; azimuth clockwise from north."""
    return panel.normal_vector(tilt=np.radians(tilt), azimuth=np.radians(azimuth))


# --- book examples ---


def test_angle_of_incidence() -> None:
    """Duffie & Beckman (2013), Example 1.6.1: 43°N, 13 February 10:30, 45° facing 15° west of
    south: 35°.
    """
    s = book_ray(43, 44, 10.5)
    angle = np.degrees(np.arccos(panel.cosine_of_incidence(s, face(45, 195))))
    assert float(angle) == pytest.approx(35, abs=0.3)
    degrees_for_radians = panel.normal_vector(tilt=45, azimuth=195)
    for wrong in (face(45, 165), face(45, 15), face(45, 75), degrees_for_radians):
        assert abs(np.degrees(np.arccos(panel.cosine_of_incidence(s, wrong))) - 35) > 5


@pytest.mark.parametrize(
    ("latitude", "day", "hour", "tilt", "azimuth", "ratio"),
    [
        (43, 44, 10.5, 45, 195, 1.66),  # Example 1.8.1
        (40, 47, 9.5, 30, 180, 1.61),  # Example 1.8.2
        (40, 47, 9.5, 50, 180, 1.79),  # Example 1.8.3, another tilt of the same place
    ],
)
def test_ratio_of_beam(
    latitude: float, day: int, hour: float, tilt: float, azimuth: float, ratio: float
) -> None:
    """Duffie & Beckman (2013): beam on the tilted over that on the horizontal plane."""
    s = book_ray(latitude, day, hour)
    found = float(panel.cosine_of_incidence(s, face(tilt, azimuth)) / s[2])
    assert found == pytest.approx(ratio, abs=0.01)
    north = float(panel.cosine_of_incidence(s, face(tilt, azimuth - 180)) / s[2])
    assert abs(north - ratio) > 0.5


def test_isotropic_view_factors() -> None:
    """Values of an open photovoltaic library's tests: sky 100 W m-2 at 40°, ground 900 × 0.25."""
    tilt = np.radians(40)
    assert 100 * float(panel.isotropic_up(tilt)) == pytest.approx(88.302222, abs=1e-6)
    assert 900 * 0.25 * float(panel.isotropic_down(tilt)) == pytest.approx(26.320000, abs=1e-5)
    assert abs(100 * np.cos(tilt) ** 2 - 88.302222) > 10
    assert abs(100 * float(panel.isotropic_up(40.0)) - 88.302222) > 10  # degrees for radians


def test_a_year_on_a_tilted_plane() -> None:
    """Duffie & Beckman (2013), Example 2.19.1, all twelve months of Madison: MJ m-2 d-1.

    Klein's mean days, Erbs' monthly diffuse fraction (FROM MEMORY, confirmed by this example), an
    isotropic sky and the ground's share.
    """
    tilt = np.radians(tables.MADISON_TILT)
    north_of_flat = []
    for month, day in enumerate(tables.KLEIN_DAYS):
        declination = float(book_sun.cooper_declination(day))
        ratio = book_sun.beam_ratio(tables.MADISON_LATITUDE, declination, tables.MADISON_TILT)
        assert ratio == pytest.approx(tables.MADISON_BEAM_RATIO[month], abs=0.015)
        whole = tables.MADISON_HORIZONTAL[month]
        k = whole / tables.MADISON_EXTRATERRESTRIAL[month]
        phi = np.radians(tables.MADISON_LATITUDE)
        sunset = sun.sunset_hour_angle(latitude=phi, declination=declination)
        if np.degrees(sunset) <= 81.4:
            share = 1.391 - 3.560 * k + 4.189 * k**2 - 2.137 * k**3
        else:
            share = 1.311 - 3.022 * k + 3.427 * k**2 - 1.821 * k**3
        from_sky = whole * share * float(panel.isotropic_up(tilt))
        from_ground = whole * tables.MADISON_GROUND[month] * float(panel.isotropic_down(tilt))
        beam = whole * (1 - share)
        assert beam * ratio + from_sky + from_ground == pytest.approx(
            tables.MADISON_TILTED[month], abs=0.06
        )
        away = book_sun.beam_ratio(
            tables.MADISON_LATITUDE, declination, tables.MADISON_TILT, south=False
        )
        north_of_flat.append(
            abs(beam * away + from_sky + from_ground - tables.MADISON_TILTED[month])
        )
    assert max(north_of_flat) > 5


# --- exact optics ---


@given(elevation=ELEVATIONS, azimuth=AZIMUTHS, tilt=TILTS, facing=AZIMUTHS)
def test_mirror_law(elevation: float, azimuth: float, tilt: float, facing: float) -> None:
    """Equal angles, one plane, unit length; turned by twice the angle of incidence."""
    s, n = ray(elevation, azimuth), panel.normal_vector(tilt=tilt, azimuth=facing)
    r = panel.reflected_vector(s, n)
    cosine = float(panel.cosine_of_incidence(s, n))
    assert float(np.linalg.norm(n)) == pytest.approx(1, abs=1e-12)
    assert float(np.linalg.norm(r)) == pytest.approx(1, abs=1e-12)
    assert float(panel.cosine_of_incidence(r, n)) == pytest.approx(cosine, abs=1e-12)
    assert float(panel.cosine_of_incidence(r, s)) == pytest.approx(2 * cosine**2 - 1, abs=1e-12)
    coplanar = np.dot(np.cross(np.array(s, float), np.array(n, float)), np.array(r, float))
    assert coplanar == pytest.approx(0, abs=1e-12)
    assert float(r[2]) == pytest.approx(2 * cosine * np.cos(tilt) - np.sin(elevation), abs=1e-12)


@given(elevation=ELEVATIONS, azimuth=AZIMUTHS)
def test_flat_and_face_on(elevation: float, azimuth: float) -> None:
    """A flat mirror keeps the height and reverses the rest; a face-on one sends the light back."""
    s = ray(elevation, azimuth)
    flat = panel.reflected_vector(s, face(0, 0))
    np.testing.assert_allclose(flat, (-s[0], -s[1], s[2]), atol=1e-12)
    facing = panel.normal_vector(tilt=np.pi / 2 - elevation, azimuth=azimuth)
    np.testing.assert_allclose(panel.reflected_vector(s, facing), s, atol=1e-12)


@given(zenith=st.floats(0, np.pi / 2), tilt=TILTS, azimuth=AZIMUTHS)
def test_tilt_toward_the_sun(zenith: float, tilt: float, azimuth: float) -> None:
    """The ray leaves at |2β − z| from the zenith; half the zenith angle sends it straight up."""
    s = ray(np.pi / 2 - zenith, azimuth)
    r = panel.reflected_vector(s, panel.normal_vector(tilt=tilt, azimuth=azimuth))
    assert float(r[2]) == pytest.approx(np.cos(2 * tilt - zenith), abs=1e-12)
    half = panel.normal_vector(tilt=zenith / 2, azimuth=azimuth)
    assert float(panel.reflected_vector(s, half)[2]) == pytest.approx(1, abs=1e-12)


@given(elevation=st.floats(1e-6, np.pi / 2), azimuth=AZIMUTHS, facing=AZIMUTHS)
def test_vertical_panel_always_reflects_down(
    elevation: float, azimuth: float, facing: float
) -> None:
    """A search that maximises the cosine of incidence alone would not notice."""
    s = ray(elevation, azimuth)
    r = panel.reflected_vector(s, panel.normal_vector(tilt=np.pi / 2, azimuth=facing))
    assert float(r[2]) < 0
    toward = panel.normal_vector(tilt=np.pi / 2, azimuth=azimuth)
    assert float(panel.cosine_of_incidence(s, toward)) == pytest.approx(np.cos(elevation), abs=1e-9)


@given(elevation=st.floats(0.02, np.pi / 2), azimuth=AZIMUTHS, tilt=TILTS, facing=AZIMUTHS)
def test_shadow_holds_the_power_of_the_panel(
    elevation: float, azimuth: float, tilt: float, facing: float
) -> None:
    """What a square metre takes is what its shadow on flat ground lacks, traced by corners."""
    s, n = ray(elevation, azimuth), panel.normal_vector(tilt=tilt, azimuth=facing)
    across = np.array([np.cos(facing), -np.sin(facing), 0.0])
    upslope = np.cross(np.array(n, float), across)
    corners = [np.zeros(3), across, across + upslope, upslope]
    shadow = np.array([c - np.array(s, float) * c[2] / float(s[2]) for c in corners])
    x, y = shadow[:, 0], shadow[:, 1]
    area = abs(np.sum(x * np.roll(y, -1) - y * np.roll(x, -1))) / 2
    cosine = abs(float(panel.cosine_of_incidence(s, n)))
    assert area * float(s[2]) == pytest.approx(cosine, abs=1e-9)


def sky_rays(count: int) -> tuple[np.ndarray, np.ndarray]:
    """Rays over the whole hemisphere, shape (3, rays), and their solid angles."""
    up = (np.arange(count) + 0.5) / count
    turn = (np.arange(2 * count) + 0.5) * np.pi / count
    z, a = (g.ravel() for g in np.meshgrid(up, turn, indexing="ij"))
    level = np.sqrt(1 - z**2)
    rays = np.stack([level * np.sin(a), level * np.cos(a), z])
    return rays, np.full(z.size, 2 * np.pi / z.size)


@pytest.mark.parametrize("tilt", [0.0, 12.0, 35.0, 60.0, 80.0, 90.0])
def test_isotropic_sky_in_a_tilted_mirror(tilt: float) -> None:
    """Of an even sky with unit horizontal flux a mirror sends cos β up and (1 − cos β)/2 down."""
    rays, solid_angle = sky_rays(700)
    n = face(tilt, 123.0)
    s = (rays[0], rays[1], rays[2])
    falls = np.maximum(panel.cosine_of_incidence(s, n), 0) * solid_angle / np.pi
    rises = panel.reflected_vector(s, n)[2] > 0
    beta = np.radians(tilt)
    assert falls[rises].sum() == pytest.approx(np.cos(beta), abs=1e-3)
    assert falls[~rises].sum() == pytest.approx((1 - np.cos(beta)) / 2, abs=1e-3)
    assert falls.sum() == pytest.approx(float(panel.isotropic_up(beta)), abs=1e-3)
    if 0 < tilt < 90:  # a matt panel splits by its view of the sky instead
        matt = float(panel.isotropic_up(beta)) ** 2
        assert abs(matt - falls[rises].sum()) > 5e-3 or tilt < 20
