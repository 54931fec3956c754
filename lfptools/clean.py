"""Per-trial noise and amplitude in, bad contacts and bad trials out."""

import numpy as np

from lfptools.model import Contacts

#: Median absolute deviation to SD of a normal distribution.
_SD_PER_MAD = 1.4826


def find_bad_contacts(contacts: Contacts, step_uv: np.ndarray, *, factor: float) -> Contacts:
    """Mark contacts whose noise is far from the array's.

    The noise of a contact is the SD of its steps from one sample to the next (slow activity
    drops out, sensor noise stays), the median over trials. A contact is dead where that lies
    below the array's median by `factor`, noisy where it lies above it by `factor`.

    Parameters
    ----------
    contacts : Contacts
        With those already known to be bad.
    step_uv : ndarray, shape (n_trials, n_contacts)
        SD of the steps in each trial, uV.
    factor : float
        Ratio of SDs, above 1.
    """
    noise = np.median(step_uv, axis=0)
    good = ~contacts.bad
    usual = np.median(noise[good]) if good.any() else np.median(noise)
    for index, value in enumerate(noise):
        if value < usual / factor:
            contacts = contacts.mark(index, f"dead: noise {value:.2g} uV, array {usual:.2g} uV")
        elif value > usual * factor:
            contacts = contacts.mark(index, f"noisy: noise {value:.2g} uV, array {usual:.2g} uV")
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
