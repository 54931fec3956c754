"""Layered current sources come in, the potential at the contacts of an array goes out.

Each layer is a disc centred on the array, in a homogeneous isotropic medium without borders.
Current source density is in uA/mm^3, sinks negative, so that a sink makes the potential
negative at its own depth. Used by the simulator and by the inverse methods.
"""

import numpy as np
from numpy.typing import ArrayLike

from lfptools import checks
from lfptools.units import A_M3_PER_UA_MM3, UV_PER_V

#: 1 um^2 in m^2.
_M2_PER_UM2 = 1e-12


def disc_potential(z_um: ArrayLike, *, radius_um: float, conductivity_s_m: float) -> np.ndarray:
    """Potential on the axis of a thin disc of current.

    Parameters
    ----------
    z_um : array_like, any shape
        Distance from the disc along its axis, in um; the sign does not matter.
    radius_um : float
        Radius of the disc, in um.
    conductivity_s_m : float
        Conductivity of the medium, in S/m.

    Returns
    -------
    np.ndarray, same shape
        Potential in uV for a planar source density of +1 uA/mm^2 (a source is positive).

    Raises
    ------
    InputError
        If radius or conductivity is not above 0.

    References
    ----------
    Pettersen et al. (2006), J Neurosci Methods 154:116-133.
    """
    radius_um, conductivity_s_m = _medium(radius_um, conductivity_s_m)
    distance_um = np.abs(np.asarray(z_um, dtype=float))
    # 1 uA/mm^2 over 1 um at 1 S/m is 1 uV: no factor is missing.
    return _on_axis_um(distance_um, radius_um) / (2 * conductivity_s_m)


def forward_matrix(
    contact_depth_um: ArrayLike,
    source_depth_um: ArrayLike,
    *,
    radius_um: float,
    conductivity_s_m: float,
    step_um: float,
) -> np.ndarray:
    """Potential at each contact for unit current source density in each cell.

    A cell is a cylinder of constant density, `step_um` high and centred on its depth; its
    potential is integrated exactly, so that the grid costs no accuracy for such sources.

    Parameters
    ----------
    contact_depth_um : array_like, shape (n_contacts,)
        Depths of the contacts, in um.
    source_depth_um : array_like, shape (n_sources,)
        Depths of the centres of the cells, in um.
    radius_um : float
        Radius of the sources, in um.
    conductivity_s_m : float
        Conductivity of the medium, in S/m.
    step_um : float
        Height of a cell, in um.

    Returns
    -------
    np.ndarray, shape (n_contacts, n_sources)
        Potential in uV for +1 uA/mm^3 (a source is positive).

    Raises
    ------
    InputError
        If radius, conductivity or height is not above 0, or a depth is not a number.

    References
    ----------
    Pettersen et al. (2006), J Neurosci Methods 154:116-133 (step inverse CSD).
    """
    radius_um, conductivity_s_m = _medium(radius_um, conductivity_s_m)
    half_um = checks.positive("the height of a source cell", step_um, "um") / 2
    contacts = checks.array("contact_depth_um", contact_depth_um, (None,))
    sources = checks.array("source_depth_um", source_depth_um, (None,))
    offset_um = contacts[:, None] - sources[None, :]
    area_um2 = _odd_primitive_um2(offset_um + half_um, radius_um) - _odd_primitive_um2(
        offset_um - half_um, radius_um
    )
    return area_um2 * (_M2_PER_UM2 * A_M3_PER_UA_MM3 * UV_PER_V / (2 * conductivity_s_m))


def _medium(radius_um: float, conductivity_s_m: float) -> tuple[float, float]:
    return (
        checks.positive("the radius of the sources", radius_um, "um"),
        checks.positive("the conductivity", conductivity_s_m, "S/m"),
    )


def _on_axis_um(z_um: np.ndarray, radius_um: float) -> np.ndarray:
    """Return sqrt(z^2 + R^2) - z for z >= 0, without the cancellation at large z."""
    return radius_um**2 / (np.hypot(z_um, radius_um) + z_um)


def _odd_primitive_um2(u_um: np.ndarray, radius_um: float) -> np.ndarray:
    """Integral of sqrt(s^2 + R^2) - |s| over s from 0 to u; odd in u."""
    distance = np.abs(u_um)
    # (u sqrt(u^2 + R^2) - u^2) / 2 written without cancellation, plus R^2 asinh(u/R) / 2.
    value = distance * _on_axis_um(distance, radius_um)
    value += radius_um**2 * np.arcsinh(distance / radius_um)
    return np.sign(u_um) * value / 2
