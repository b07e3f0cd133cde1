"""Energy is never created: every watt is followed and the entries add up to what came in.

Once with the package's kernels, once through the direct quadrature to the rejected flux itself.
"""

from __future__ import annotations

import numpy as np
import pytest
from direct_quadrature import CLOUD_CLASSES, Panel, air_of, build_scene, evaluate, normal
from direct_sky import DIFFUSE_AIR_MASS, Sky, air_mass, cloud_classes, moment_of_sky
from energy_ledger import Arriving, Ledger, Optics, bare, with_panel
from hypothesis import given, settings
from hypothesis import strategies as st
from invented_cells import random_cells

from gridcool.physics import atmosphere, clouds, escape, panel, sun
from gridcool.physics.atmosphere import Atmosphere

BARE_SKY = Sky(snow_covers_panel=False)
CELLS = random_cells(3, 24)


def assert_balanced(ledger: Ledger, arriving: Arriving) -> None:
    np.testing.assert_allclose(ledger.total, arriving.total + 0 * ledger.total, rtol=1e-12)
    assert ledger.smallest >= 0


@settings(deadline=None, max_examples=60)
@given(
    column=st.builds(
        Atmosphere,
        st.floats(0.4, 1.05),
        st.floats(0.05, 7.0),
        st.floats(0.002, 1.2),
        st.floats(0.1, 0.6),
    ),
    n=st.floats(0, 1),
    ground=st.floats(0, 0.9),
    elevation=st.floats(0.01, np.pi / 2),
    bearing=st.floats(0, 2 * np.pi),
    tilt=st.floats(0, np.pi / 2),
    reflectance=st.floats(0, 1),
    specular=st.floats(0, 1),
)
def test_ledger_of_the_kernels(
    column: Atmosphere,
    n: float,
    ground: float,
    elevation: float,
    bearing: float,
    tilt: float,
    reflectance: float,
    specular: float,
) -> None:
    """The kernels' light, followed bounce by bounce: nothing negative, nothing made, nothing lost.

    What air absorbs is taken from the absorption transmittances alone, so that T + R + absorbed = 1
    is checked and not assumed.
    """
    s = (
        np.cos(elevation) * np.sin(bearing),
        np.cos(elevation) * np.cos(bearing),
        np.sin(elevation),
    )
    face = panel.normal_vector(tilt=tilt, azimuth=0.0)
    vector = (np.asarray(s[0]), np.asarray(s[1]), np.asarray(s[2]))
    cosine = float(panel.cosine_of_incidence(vector, face))
    rising = float(panel.reflected_vector(vector, face)[2])
    down = float(sun.air_mass(s[2]))
    up = float(sun.air_mass(max(rising, 0.0)))
    beam_clear, scattered = atmosphere.clear_sky(column, down, s[2], 1361.0)
    sky_albedo = atmosphere.sky_albedo(column)
    clear = float((beam_clear * s[2] + scattered) / (1 - ground * sky_albedo))
    beam = float(clouds.beam_transmission(n) * beam_clear)
    whole = float(clouds.global_transmission(n)) * clear
    diffuse = whole - beam * s[2]
    assert diffuse >= -1e-9

    def absorbed(m_down: float, m_up: float) -> float:
        after = atmosphere.absorption_transmittance(column, m_down + m_up)
        return float(1 - after / atmosphere.absorption_transmittance(column, m_down))

    ray_up, ray_back = escape.ray_escape(column, down, up)
    light_up, light_back = escape.diffuse_escape(column)
    optics = Optics(
        ground=ground,
        ray_up=float(ray_up),
        ray_back=float(ray_back),
        ray_absorbed=absorbed(down, up),
        light_up=float(light_up),
        light_back=float(light_back),
        light_absorbed=absorbed(atmosphere.DIFFUSE_AIR_MASS, atmosphere.DIFFUSE_AIR_MASS),
        overcast=float(clouds.overcast_weight(n)),
        clear_path=float(clouds.beam_transmission(n)),
        deck_through=clouds.OVERCAST_TRANSMITTANCE,
        deck_back=clouds.OVERCAST_REFLECTANCE,
    )
    arriving = Arriving(
        beam_front=beam * max(cosine, 0.0),
        beam_back=beam * max(-cosine, 0.0),
        diffuse=max(diffuse, 0.0),
        ground_light=ground * whole * float(panel.isotropic_down(tilt)),
    )
    without = bare(arriving, optics)
    changed = with_panel(
        arriving,
        optics,
        goes_up=rising > 0,
        cos_tilt=float(np.cos(tilt)),
        reflectance=reflectance,
        specular=specular,
        back_reflectance=0.3,
    )
    assert_balanced(without, arriving)
    assert_balanced(changed, arriving)
    # And the closed form of E_d is the sum of those bounces.
    unit = Ledger()
    unit.from_ground(1.0, optics)
    closed = clouds.ground_light_escape(n, ground, light_up, light_back)
    assert float(unit.escaped) == pytest.approx(float(closed), rel=1e-9)


@pytest.mark.parametrize("index", [0, 5, 11])
@pytest.mark.parametrize(
    ("tilt", "azimuth", "specular"),
    [(0.0, 0.0, 1.0), (28.0, 180.0, 1.0), (35.0, 300.0, 0.6), (70.0, 0.0, 0.0)],
)
def test_ledger_gives_the_rejected_flux(
    index: int, tilt: float, azimuth: float, specular: float
) -> None:
    """What escapes with the panel minus what escapes without is the F of the closed account."""
    cell = CELLS[index]
    mirror = Panel(0.88, specular, 0.3)
    scene = build_scene(cell, BARE_SKY, steps_per_day=24)
    expected = evaluate(scene, mirror, tilt, azimuth).monthly
    columns, face = air_of(cell), normal(tilt, azimuth)
    t_d, r_d = columns.diffuse_escape()
    for month in (0, 6):
        here = scene.month == month
        if not here.any():
            continue
        mean_cloud = float(cell.cloud[month])
        probability, n = cloud_classes(mean_cloud, BARE_SKY.concentration, CLOUD_CLASSES)
        k, s, _ = moment_of_sky(n, 0.2, 0.8, 0.1, BARE_SKY)
        sun_ray = scene.sun[:, here, None]
        cosine = np.tensordot(face, sun_ray, axes=1)
        rising = 2 * cosine * face[2] - sun_ray[2]
        m_down, m_up = scene.air_mass[here, None], air_mass(np.where(rising > 0, rising, 1.0))
        air = type(columns)(*(np.asarray(v)[month] for v in vars(columns).values()))
        ray_up, ray_back = air.escape(m_down, m_up)
        optics = Optics(
            ground=float(cell.albedo[month]),
            ray_up=ray_up,
            ray_back=ray_back,
            ray_absorbed=1 - air.absorption(m_down + m_up) / air.absorption(m_down),
            light_up=float(t_d[month]),
            light_back=float(r_d[month]),
            light_absorbed=1
            - air.absorption(2 * DIFFUSE_AIR_MASS) / air.absorption(DIFFUSE_AIR_MASS),
            overcast=n**3.4,
            clear_path=s,
        )
        beam = s * scene.beam[here, None]
        whole = k * scene.total[here, None]
        arriving = Arriving(
            beam_front=beam * np.maximum(cosine, 0),
            beam_back=beam * np.maximum(-cosine, 0),
            diffuse=np.maximum(whole - beam * sun_ray[2], 0),
            ground_light=float(cell.albedo[month]) * whole * (1 - face[2]) / 2,
        )
        changed = with_panel(
            arriving,
            optics,
            goes_up=rising > 0,
            cos_tilt=float(face[2]),
            reflectance=mirror.reflectance,
            specular=mirror.specular_share,
            back_reflectance=mirror.back_reflectance,
        )
        without = bare(arriving, optics)
        assert_balanced(changed, arriving)
        assert_balanced(without, arriving)
        gained = ((changed.escaped - without.escaped) * probability).sum(axis=1)
        found = float((gained * scene.weight[here]).sum())
        assert found == pytest.approx(expected[month], rel=1e-6, abs=1e-6)
        if abs(expected[month]) > 5:
            lost_back = (without.escaped * probability).sum(axis=1)
            wrong = float(((gained + lost_back) * scene.weight[here]).sum())
            assert abs(wrong / expected[month] - 1) > 0.02  # the bare ground forgotten
