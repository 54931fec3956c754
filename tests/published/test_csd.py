"""Current source density against closed forms.

Sources
-------
- Nicholson and Freeman (1975), J. Neurophysiol. 38:356-368: C = -sigma d2(phi)/dz2 (from
  memory). Units: 1 mV/mm^2 x .3 S/m = .3 uA/mm^3 (SI).
- Vaknin, DiScenna and Teyler (1988), J. Neurosci. Methods 24:131-135: outermost channels
  duplicated; tested by summing sinks and sources over layers.
- Response of the discrete second derivative to cos(kz): sinc^2(kh/2), elementary.
"""

import numpy as np
import pytest

from lfptools.csd import csd_operator, interpolation, second_derivative
from lfptools.errors import InputError
from lfptools.model import Contacts


def contacts(depth_um, bad=()):
    marked = np.isin(np.arange(len(depth_um)), bad)
    return Contacts(np.arange(len(depth_um)), np.asarray(depth_um, float), marked,
                    tuple("listed" if each else "" for each in marked))  # fmt: skip


DEPTH = np.arange(16) * 100.0


def test_quadratic_potential_gives_minus_600_a_per_m3():
    # phi = 1000 z^2 V (z in m) and .3 S/m: C = -600 A/m^3 = -.6 uA/mm^3, exactly, inside.
    phi_uv = 1000 * (DEPTH * 1e-6) ** 2 * 1e6
    found = csd_operator(contacts(DEPTH), conductivity_s_m=0.3).matrix @ phi_uv
    np.testing.assert_allclose(found[1:-1], -0.6, rtol=1e-9)


def test_quadratic_potential_on_uneven_depths():
    depth = np.array([0, 80, 200, 250, 400, 480, 600.0])
    phi_uv = 1000 * (depth * 1e-6) ** 2 * 1e6
    found = csd_operator(contacts(depth), conductivity_s_m=0.3).matrix @ phi_uv
    np.testing.assert_allclose(found[1:-1], -0.6, rtol=1e-9)


def test_cosine_is_damped_by_sinc_squared():
    # h = 100 um, wavelength 800 um: .9496412.
    k = 2 * np.pi / 800
    found = second_derivative(DEPTH) @ np.cos(k * DEPTH)
    exact = -(k**2) * np.cos(k * DEPTH)
    np.testing.assert_allclose(found[1:-1], 0.9496412 * exact[1:-1], rtol=5e-8, atol=1e-15)


def test_sinks_and_sources_sum_to_zero_over_the_array():
    phi_uv = np.random.default_rng(1).normal(size=(16, 50)) * 100
    found = csd_operator(contacts(DEPTH), conductivity_s_m=0.3).matrix @ phi_uv
    np.testing.assert_allclose(found.sum(axis=0), 0, atol=1e-9)


def test_noise_gain_of_the_second_derivative():
    # Weights (1, -2, 1) / h^2: root of 6 times sigma / h^2, elementary.
    found = csd_operator(contacts(DEPTH), conductivity_s_m=0.3).noise_gain
    assert found[5] == pytest.approx(np.sqrt(6) * 0.3e-6 / 1e-8 / 1000)


def test_a_bad_contact_is_filled_in_from_its_neighbours():
    matrix = interpolation(contacts(DEPTH, bad=[7]))
    assert np.all(matrix[:, 7] == 0)
    np.testing.assert_allclose(matrix @ np.ones(16), 1, atol=1e-12)
    smooth = np.exp(-(((DEPTH - 700) / 250) ** 2))
    straight = (smooth[6] + smooth[8]) / 2
    assert abs((matrix @ smooth)[7] - smooth[7]) < 0.2 * abs(straight - smooth[7])


def test_a_bad_outermost_contact_keeps_the_next_ones_value():
    matrix = interpolation(contacts(DEPTH, bad=[0]))
    np.testing.assert_allclose((matrix @ DEPTH)[0], DEPTH[1])


def test_too_few_good_contacts_are_refused():
    with pytest.raises(InputError, match="4 of 6 contacts are good"):
        csd_operator(contacts(DEPTH[:6], bad=[1, 2]), conductivity_s_m=0.3)
