"""Potentials along a linear array in, current source density by depth out.

Each method is one precomputed linear operator, applied alike to averages, single trials and
resamples. Sign: sinks (current leaving the extracellular space) are negative.
"""

from dataclasses import dataclass

import numpy as np
from scipy.interpolate import CubicSpline

from lfptools.errors import InputError
from lfptools.model import MIN_CONTACTS, Contacts, Frozen, Signals, Trials
from lfptools.units import A_M3_PER_UA_MM3, UV_PER_V


@dataclass(frozen=True, slots=True, eq=False)
class CsdOperator(Frozen):
    """A matrix from potentials (uV) at all contacts to current source density (uA/mm^3)."""

    matrix: np.ndarray  # (n_depths, n_contacts); columns of bad contacts are 0
    depth_um: np.ndarray  # (n_depths,)
    method: str
    conductivity_s_m: float
    noise_gain: np.ndarray  # (n_depths,) SD in uA/mm^3 for independent noise of 1 uV


def interpolation(contacts: Contacts) -> np.ndarray:
    """Return the matrix that fills bad contacts in along depth, shape (n, n).

    A cubic spline through the good contacts; beyond the outermost good one its value is kept.

    Raises
    ------
    InputError
        If fewer than 5 contacts are good.
    """
    good = ~contacts.bad
    n_good = int(np.count_nonzero(good))
    if n_good < MIN_CONTACTS:
        raise InputError(
            f"{n_good} of {len(contacts)} contacts are good; current source density needs "
            f"at least {MIN_CONTACTS}"
        )
    depth = contacts.depth_um[good]
    spline = CubicSpline(depth, np.eye(n_good), bc_type="natural")
    matrix = np.zeros((len(contacts), len(contacts)))
    matrix[:, good] = spline(np.clip(contacts.depth_um, depth[0], depth[-1]))
    matrix[np.ix_(good, good)] = np.eye(n_good)
    return matrix


def second_derivative(depth_um: np.ndarray) -> np.ndarray:
    """Return the second spatial derivative, shape (n, n), per um^2, on uneven depths too.

    The outermost contacts are duplicated one distance further out, so that the density exists
    at the ends.

    References
    ----------
    Vaknin, DiScenna and Teyler (1988), J. Neurosci. Methods 24:131-135.
    """
    n = len(depth_um)
    wide = np.concatenate([[2 * depth_um[0] - depth_um[1]], depth_um,
                           [2 * depth_um[-1] - depth_um[-2]]])  # fmt: skip
    above, below = np.diff(wide)[:-1], np.diff(wide)[1:]
    padded = np.zeros((n, n + 2))
    rows = np.arange(n)
    padded[rows, rows] = 2 / (above * (above + below))
    padded[rows, rows + 1] = -2 / (above * below)
    padded[rows, rows + 2] = 2 / (below * (above + below))
    matrix = padded[:, 1:-1].copy()
    matrix[0, 0] += padded[0, 0]
    matrix[-1, -1] += padded[-1, -1]
    return matrix


def csd_operator(
    contacts: Contacts, *, conductivity_s_m: float, method: str = "second_derivative"
) -> CsdOperator:
    """Return the operator for an array: -conductivity x second derivative of the potential.

    Bad contacts are first filled in along depth.

    Parameters
    ----------
    contacts : Contacts
        Depths in um, rising; bad ones marked.
    conductivity_s_m : float
        Conductivity of the tissue, S/m.
    method : str
        "second_derivative".

    Raises
    ------
    InputError
        If fewer than 5 contacts are good or the method is unknown.

    References
    ----------
    Nicholson and Freeman (1975), J. Neurophysiol. 38:356-368; Mitzdorf (1985), Physiol. Rev.
    65:37-100.
    """
    if method != "second_derivative":
        raise InputError(f"csd method is {method!r}; it must be second_derivative")
    per_m2 = second_derivative(contacts.depth_um) * 1e12
    scale = conductivity_s_m / UV_PER_V / A_M3_PER_UA_MM3
    matrix = -scale * per_m2 @ interpolation(contacts)
    return CsdOperator(
        matrix=matrix,
        depth_um=contacts.depth_um,
        method=method,
        conductivity_s_m=conductivity_s_m,
        noise_gain=np.sqrt((matrix**2).sum(axis=1)),
    )


def csd_signals(trials: Trials, operator: CsdOperator) -> Signals:
    """Return the current source density of every trial, (n_trials, n_contacts, n_times)."""
    matrix = operator.matrix.astype(trials.data_uv.dtype)
    return Signals(
        area=trials.area,
        kind="csd",
        channel=trials.contacts.channel,
        depth_um=operator.depth_um,
        data=np.matmul(matrix, trials.data_uv),
        time_s=trials.time_s,
        rate_hz=trials.rate_hz,
    )
