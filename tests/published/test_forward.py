"""Potentials of disc sources against closed forms and published element values.

Sources: Pettersen et al. 2006, J Neurosci Methods 154:116-133 (delta and step inverse CSD:
element formulas; the values below were computed from them by quadrature in SI units, 9 digits,
h = 100 um, R = 250 um, 0.3 S/m); the potential of a point source I / (4 pi sigma r) is textbook
physics; sigma * Laplacian(phi) = -C: Leski et al. 2011, Neuroinformatics 9:401-425.
"""

from itertools import pairwise

import numpy as np
import pytest
from scipy.integrate import quad

from lfptools.errors import InputError
from lfptools.forward import disc_potential, forward_matrix

H_UM, R_UM, SIGMA = 100.0, 250.0, 0.3
DELTA_SI = [4.16666667e-8, 2.82097067e-8, 2.00260353e-8, 1.50854140e-8]
STEP_SI = [3.77761345e-8, 2.84316789e-8, 2.01587512e-8, 1.51586444e-8]
LAST_DIGIT = 0.51e-16


def test_disc_elements_equal_the_published_formula_to_nine_digits() -> None:
    z_um = H_UM * np.arange(4)
    potential_uv = disc_potential(z_um, radius_um=R_UM, conductivity_s_m=SIGMA)
    # Planar density = volume density x h: uV per uA/mm^2 x 0.1 mm -> V per A/m^3.
    element_si = potential_uv * 1e-6 * (H_UM / 1000) / 1000
    np.testing.assert_allclose(element_si, DELTA_SI, rtol=0, atol=LAST_DIGIT)


def test_step_elements_equal_the_published_formula_to_nine_digits() -> None:
    depth_um = H_UM * np.arange(4)
    matrix_uv = forward_matrix(
        depth_um[:1], depth_um, radius_um=R_UM, conductivity_s_m=SIGMA, step_um=H_UM
    )
    np.testing.assert_allclose(matrix_uv[0] * 1e-6 / 1000, STEP_SI, rtol=0, atol=LAST_DIGIT)


def test_a_cell_equals_the_integral_of_discs() -> None:
    def disc(depth_um: float) -> float:
        return float(disc_potential(depth_um, radius_um=400.0, conductivity_s_m=0.27))

    for contact_um in (0.0, 3.0, 5.0, 700.0):
        matrix = forward_matrix(
            [contact_um], [0.0], radius_um=400.0, conductivity_s_m=0.27, step_um=10.0
        )
        kink = sorted({-5.0, min(contact_um, 5.0), 5.0})
        integral = sum(
            quad(lambda s: disc(contact_um - s), low, high, epsabs=1e-12)[0]  # noqa: B023
            for low, high in pairwise(kink)
        )
        assert matrix[0, 0] == pytest.approx(integral / 1000, rel=1e-10)


def test_a_small_disc_is_a_point_source() -> None:
    # 1 nA at 100 um, 0.3 S/m: 2.6525824 uV.
    radius_um = 0.01
    area_mm2 = np.pi * (radius_um / 1000) ** 2
    density = 1e-3 / area_mm2  # 1 nA = 1e-3 uA
    potential = density * disc_potential(100.0, radius_um=radius_um, conductivity_s_m=0.3)
    assert potential == pytest.approx(2.6525824, abs=5e-8)


@pytest.mark.parametrize(
    ("radius_um", "row", "digits"),
    [
        (250.0, [0.0001, -0.9437, 2.1041, -0.9437, 0.0001], 4),
        (1000.0, [0.0016, -0.9981, 2.002, -0.9981, 0.0016], 4),
        (10_000.0, [0, -1, 2, -1, 0], 3),
    ],
)
def test_the_inverse_tends_to_the_second_difference(
    radius_um: float, row: list[float], digits: int
) -> None:
    # Mid row of F^-1 h^2 / sigma for 23 contacts; R = 10 mm is the limit of wide sources.
    depth_um = H_UM * np.arange(23)
    z_um = depth_um[:, None] - depth_um
    delta_um2 = H_UM * disc_potential(z_um, radius_um=radius_um, conductivity_s_m=SIGMA)
    middle = np.linalg.inv(delta_um2)[11, 9:14] * H_UM**2 / SIGMA
    np.testing.assert_allclose(middle, row, atol=0.51 * 10.0**-digits)


def test_wide_sources_obey_poissons_equation() -> None:
    cells_um = np.arange(5.0, 2000.0, 10.0)
    density = -np.exp(-0.5 * ((cells_um - 1000.0) / 200.0) ** 2)
    contact_um = np.arange(600.0, 1401.0, 20.0)
    matrix = forward_matrix(
        contact_um, cells_um, radius_um=1e6, conductivity_s_m=0.27, step_um=10.0
    )
    curvature = np.diff(matrix @ density, 2) / 20.0**2
    # -sigma phi'': uV/um^2 x S/m = 1e6 A/m^3 = 1e3 uA/mm^3.
    recovered = -0.27 * curvature * 1e3
    expected = np.interp(contact_um[1:-1], cells_um, density)
    np.testing.assert_allclose(recovered, expected, atol=5e-3)


def test_a_sink_is_negative_and_balanced_currents_vanish_far_away() -> None:
    cells_um = np.array([100.0, 200.0, 300.0])
    far_um = np.array([200.0, 1e5, 2e5])
    matrix = forward_matrix(far_um, cells_um, radius_um=R_UM, conductivity_s_m=SIGMA, step_um=10.0)
    sink_alone = matrix @ [0.0, -1.0, 0.0]
    balanced = matrix @ [0.5, -1.0, 0.5]
    assert sink_alone[0] < 0
    assert balanced[0] < 0
    # A monopole falls as 1/r, a quadrupole as 1/r^3.
    assert sink_alone[1] / sink_alone[2] == pytest.approx(2, rel=0.01)
    assert balanced[1] / balanced[2] == pytest.approx(8, rel=0.01)


@pytest.mark.parametrize(
    ("change", "says"),
    [
        ({"radius_um": 0.0}, "the radius of the sources is 0 um; it must be a number above 0"),
        ({"conductivity_s_m": -0.3}, "the conductivity is -0.3 S/m"),
        ({"step_um": np.nan}, "the height of a source cell is nan um"),
    ],
)
def test_impossible_media_are_refused(change: dict, says: str) -> None:
    given = {"radius_um": 250.0, "conductivity_s_m": 0.3, "step_um": 10.0, **change}
    with pytest.raises(InputError, match=says):
        forward_matrix([0.0], [0.0], **given)


def test_depths_must_be_numbers() -> None:
    with pytest.raises(InputError, match="contact_depth_um holds 1 values that are not finite"):
        forward_matrix([np.nan], [0.0], radius_um=1.0, conductivity_s_m=1.0, step_um=1.0)
