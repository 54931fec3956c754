"""Per-trial noise and amplitude in, bad contacts and bad trials out."""

import numpy as np

from lfptools.model import Contacts

#: Median absolute deviation to SD of a normal distribution.
_SD_PER_MAD = 1.4826


def step_noise(step_uv: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the SD of each contact's steps, as they are and beside a neighbour's.

    Parameters
    ----------
    step_uv : ndarray, shape (n_contacts, n_samples)
        Differences from one sample to the next: slow activity drops out.

    Returns
    -------
    own, local : ndarray, shape (n_contacts,)
        SD of the steps; least SD of their difference from one of the two contacts on either
        side, which leaves what no neighbour shares.
    """
    own = step_uv.std(axis=1)
    local = np.full(len(own), np.inf)
    for distance in (1, 2):
        if len(own) > distance:
            difference = (step_uv[distance:] - step_uv[:-distance]).std(axis=1)
            local[distance:] = np.minimum(local[distance:], difference)
            local[:-distance] = np.minimum(local[:-distance], difference)
    return own, np.where(np.isfinite(local), local, own)


def find_bad_contacts(
    contacts: Contacts, step_uv: np.ndarray, local_uv: np.ndarray, *, factor: float
) -> Contacts:
    """Mark contacts whose noise is far from the array's.

    A contact is dead where its steps are smaller than the array's median by `factor`, noisy
    where its steps beside those of the most similar neighbour are larger than the array's
    median by `factor`. Both are medians over trials, so that single artefacts do not count.

    Parameters
    ----------
    contacts : Contacts
        With those already known to be bad.
    step_uv, local_uv : ndarray, shape (n_trials, n_contacts)
        What `step_noise` found in each trial, uV.
    factor : float
        Ratio of SDs, above 1.
    """
    own, local = np.median(step_uv, axis=0), np.median(local_uv, axis=0)
    good = ~contacts.bad if not contacts.bad.all() else contacts.bad
    usual_own, usual_local = np.median(own[good]), np.median(local[good])
    for index in range(len(contacts)):
        if own[index] < usual_own / factor:
            why = f"dead: steps of {own[index]:.2g} uV, the array's {usual_own:.2g} uV"
            contacts = contacts.mark(index, why)
        elif local[index] > usual_local * factor:
            why = f"noisy: {local[index]:.2g} uV beside its neighbours, usual {usual_local:.2g} uV"
            contacts = contacts.mark(index, why)
    return contacts


def large_trials(
    amplitude_uv: np.ndarray, condition: np.ndarray, *, robust_sd: float
) -> np.ndarray:
    """Return which trials are far larger than the others of their condition on any contact.

    Judged on the logarithm of the peak-to-peak amplitude, which is near normal, against the
    median and the median absolute deviation over the trials of the same condition.

    Parameters
    ----------
    amplitude_uv : ndarray, shape (n_trials, n_contacts)
        Peak to peak, uV; NaN where a trial was not read (never marked here).
    condition : ndarray of str, shape (n_trials,)
        Condition of each trial.
    robust_sd : float
        How many robust SDs above the median a trial may lie.

    Returns
    -------
    ndarray of bool, shape (n_trials,)
    """
    marked = np.zeros(len(condition), dtype=bool)
    log = np.log(np.maximum(amplitude_uv, 1e-6))
    for each in np.unique(condition):
        rows = (condition == each) & np.isfinite(log).all(axis=1)
        if not rows.any():
            continue
        centre = np.median(log[rows], axis=0)
        spread = _SD_PER_MAD * np.median(np.abs(log[rows] - centre), axis=0)
        marked[rows] = ((log[rows] - centre) > robust_sd * np.maximum(spread, 0.05)).any(axis=1)
    return marked
