"""Laws that the potential of layered sources obeys for any geometry."""

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from lfptools.forward import disc_potential, forward_matrix

depths = st.lists(st.floats(-3000, 3000), min_size=1, max_size=5)
radii = st.floats(10, 5000)
steps = st.floats(1, 200)


@given(depths, radii)
@settings(max_examples=50, deadline=None)
def test_the_potential_is_even_and_falls_with_distance(depth: list[float], radius: float) -> None:
    z_um = np.sort(np.abs(depth))
    above = disc_potential(z_um, radius_um=radius, conductivity_s_m=0.3)
    below = disc_potential(-z_um, radius_um=radius, conductivity_s_m=0.3)
    np.testing.assert_array_equal(above, below)
    assert np.all(np.diff(above) <= 0)


@given(depths, depths, radii, steps, st.floats(0.1, 10))
@settings(max_examples=50, deadline=None)
def test_all_lengths_times_k_make_the_matrix_k_squared(
    contact: list[float], source: list[float], radius: float, step: float, k: float
) -> None:
    contact_um, source_um = np.array(contact), np.array(source)
    plain = forward_matrix(
        contact_um, source_um, radius_um=radius, conductivity_s_m=0.3, step_um=step
    )
    scaled = forward_matrix(
        k * contact_um, k * source_um, radius_um=k * radius, conductivity_s_m=0.3, step_um=k * step
    )
    np.testing.assert_allclose(scaled, k**2 * plain, rtol=1e-6)


@given(st.floats(-2000, 2000), radii, steps, st.integers(2, 10))
@settings(max_examples=50, deadline=None)
def test_a_cell_is_the_sum_of_its_parts(
    contact: float, radius: float, step: float, n_parts: int
) -> None:
    def potential(source_um: np.ndarray, step_um: float) -> float:
        return forward_matrix(
            [contact], source_um, radius_um=radius, conductivity_s_m=0.27, step_um=step_um
        ).sum()

    part_um = step / n_parts
    parts_um = (np.arange(n_parts) - (n_parts - 1) / 2) * part_um
    np.testing.assert_allclose(
        potential(parts_um, part_um), potential(np.zeros(1), step), rtol=1e-6
    )
