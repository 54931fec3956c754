"""A cut session in; how each unit's spikes follow the local field, band by band, out.

Two measures a unit, condition, window and band: the pairwise phase consistency of the field's
phase at the spikes, and the multitaper coherence of spike train and field. Trials keep their
evoked response: what the stimulus alone produces, spikes and field locked to it each by itself,
is what remains when the spikes of each trial are paired with the field of another, and p is
against those shuffles.
"""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from scipy.sparse import csr_array

from lfptools import bands
from lfptools.choices import Span, WindowChoice
from lfptools.errors import InputError
from lfptools.model import Contacts, CutSession, Trials
from lfptools.spike_field import (
    Shuffles,
    coherence_estimates,
    draw_shuffles,
    kernel_reach,
    kernel_sd_s,
    phase_estimates,
    phase_vectors,
)
from lfptools.spikes import SpikesAround, said, spikes_around
from lfptools.trials import FEW_TRIALS, MIN_TRIALS, window_mask

#: With fewer spikes nothing is estimated.
MIN_SPIKES = 20
#: What a trial must hold beside the span for the phase, in sd in time of the Gabor kernel: at
#: most 2 % of the kernel's weight then lies outside the trial.
NEEDED_SD = 2.0
MEASURES = ("ppc", "coherence")
ESTIMATES = ("value", "lo", "hi", "null", "p", "phase_deg", "phase_lo_deg", "phase_hi_deg")
FIELDS = ("neighbour", "same")


@dataclass(frozen=True, slots=True, eq=False)
class Field:
    """The contact whose field a unit is held against; `why_not` says why there is none."""

    area: str
    trials: Trials | None = None
    contact: int = -1
    why_not: str = ""

    @property
    def channel(self) -> int | str:
        """Channel of the contact in its recording; empty where there is none."""
        return "" if self.trials is None else int(self.trials.contacts.channel[self.contact])


@dataclass(frozen=True, slots=True, eq=False)
class _Condition:
    """The trials of one condition; `shuffles` is None where they are too few."""

    name: str
    trials: np.ndarray  # (n_trials,) index among the accepted trials
    stimulus_s: np.ndarray  # (n_trials,)
    shuffles: Shuffles | None


def coupling_rows(cut: CutSession, *, rng: np.random.Generator) -> list[dict]:
    """Return one row a unit, condition, window, band and measure, as coupling.csv has them.

    `session` and `q` are the caller's. A row that cannot be estimated is kept, with the reason
    in `note`. The phase stands in the rows of `ppc`; 0 degrees is the positive peak of the
    field and 180 its trough, and the bounds are not wrapped, so that lo <= phase <= hi.

    Parameters
    ----------
    cut : CutSession
        The session, cut into trials; times in s, potentials in uV, depths in um.
    rng : Generator
        Draws the shuffles of trials and the bootstrap of the phase.

    Returns
    -------
    list of dict
        Empty where no unit or no field was recorded.

    Raises
    ------
    InputError
        If `[coupling] field` names no area of the session.
    """
    _known_field(cut)
    if cut.spikes is None or not cut.areas:
        return []
    fields = [choose_field(cut, unit) for unit in range(len(cut.spikes))]
    conditions = [_condition(cut, each, rng) for each in cut.table.conditions]
    rows: list[dict] = []
    for unit, field in enumerate(fields):
        for condition in conditions:
            for window in cut.choices.window:
                if window.holds(cut.spikes.area[unit]):
                    rows += _rows(cut, unit, field, condition, window)
    return rows


def choose_field(cut: CutSession, unit: int) -> Field:
    """Return the contact whose field unit number `unit` is held against.

    "neighbour": in the unit's own area, the good contact next to the one nearest to the unit,
    never that one itself, whose field holds the unit's own spikes; of two equally near, the one
    farther from the unit, then the shallower. "same": the nearest contact itself, where it is
    good. An area's name: the good contact nearest to the middle of its array, which no look at
    the data has chosen.

    Raises
    ------
    InputError
        If `[coupling] field` names no area of the session.
    """
    _known_field(cut)
    assert cut.spikes is not None
    wanted = cut.choices.coupling.field
    area = cut.spikes.area[unit] if wanted in FIELDS else wanted
    trials = cut.trials_of(area)
    if trials is None:
        return Field(area, why_not=f"no LFP recorded in {area}")
    depth_um = float(cut.spikes.depth_um[unit])
    if wanted in FIELDS and not np.isfinite(depth_um):
        return Field(area, why_not="depth of the unit is unknown")
    contact = _contact(trials.contacts, wanted, depth_um)
    if contact is None:
        return Field(area, why_not=f"no good contact in {area} for field {wanted!r}")
    return Field(area, trials, contact)


def _known_field(cut: CutSession) -> None:
    wanted = cut.choices.coupling.field
    if wanted not in (*FIELDS, *cut.area_names):
        raise InputError(
            f"[coupling] field is {wanted!r}; it must be one of "
            f"{', '.join((*FIELDS, *cut.area_names))}"
        )


def _contact(contacts: Contacts, wanted: str, unit_depth_um: float) -> int | None:
    depth_um, good = contacts.depth_um, ~contacts.bad
    if wanted not in FIELDS:
        good_contacts = np.flatnonzero(good)
        middle_um = (depth_um.min() + depth_um.max()) / 2
        near = np.abs(depth_um[good_contacts] - middle_um)
        return int(good_contacts[near.argmin()]) if good_contacts.size else None
    to_unit_um = np.abs(depth_um - unit_depth_um).round(6)
    own = int(to_unit_um.argmin())
    if wanted == "same":
        return own if good[own] else None
    others = np.flatnonzero(good & (np.arange(len(good)) != own))
    to_own_um = np.abs(depth_um - depth_um[own]).round(6)
    ranked = np.lexsort((depth_um[others], -to_unit_um[others], to_own_um[others]))
    return int(others[ranked[0]]) if others.size else None


def _condition(cut: CutSession, name: str, rng: np.random.Generator) -> _Condition:
    trials = np.flatnonzero(cut.condition == name)
    settings = cut.choices.resample
    shuffles = None
    if len(trials) >= MIN_TRIALS:
        shuffles = draw_shuffles(
            len(trials),
            n_shuffles=cut.choices.coupling.n_shuffles,
            n_draws=settings.n,
            level=settings.level,
            rng=rng,
        )
    return _Condition(name, trials, cut.table.accepted_time_s()[trials], shuffles)


def _rows(
    cut: CutSession,
    unit: int,
    field: Field,
    condition: _Condition,
    window: WindowChoice,
) -> Iterator[dict]:
    """Yield the rows of all bands and measures of one unit, condition and window."""
    assert cut.spikes is not None
    span_s = window.direction_span_s
    spikes = spikes_around(cut.spikes.time_s[unit], condition.stimulus_s, span_s=span_s)
    for name, band_hz in cut.choices.coupling.bands_hz.items():
        for measure in MEASURES:
            estimates, note = _estimate(field, spikes, span_s, band_hz, measure, condition)
            yield {
                "area": cut.spikes.area[unit],
                "unit": cut.spikes.unit[unit],
                "field_area": field.area,
                "field_channel": field.channel,
                "condition": condition.name,
                "window": window.name,
                "band": name,
                "band_lo_hz": band_hz[0],
                "band_hi_hz": band_hz[1],
                "measure": measure,
                **dict.fromkeys(ESTIMATES, np.nan),
                **estimates,
                "n_spikes": len(spikes),
                "n_trials": spikes.n_trials,
                "note": note,
            }


def _estimate(
    field: Field,
    spikes: SpikesAround,
    span_s: Span,
    band_hz: Span,
    measure: str,
    condition: _Condition,
) -> tuple[dict[str, float], str]:
    """Return the estimates of one row, or none and the reason."""
    if condition.shuffles is None:
        return {}, FEW_TRIALS
    if field.trials is None:
        return {}, field.why_not
    why = bands.why_not(band_hz, span_s, field.trials.rate_hz)
    if measure == "ppc":
        why = why or _why_no_phase(field.trials, span_s, band_hz)
    if why:
        return {}, why
    if len(spikes) < MIN_SPIKES:
        return {}, f"{said(len(spikes))}; not estimated below {MIN_SPIKES}"
    lfp_uv = field.trials.data_uv[condition.trials, field.contact].astype(float)
    inside = np.flatnonzero(window_mask(field.trials.time_s, span_s))
    if not np.ptp(lfp_uv[:, inside], axis=1).any():
        return {}, "the field is flat"
    if measure == "ppc":
        return _ppc(field.trials, lfp_uv, spikes, band_hz, condition.shuffles), ""
    return _coherence(
        field.trials, lfp_uv[:, inside], inside, spikes, band_hz, condition.shuffles
    ), ""


def _why_no_phase(trials: Trials, span_s: Span, band_hz: Span) -> str:
    needed_s = NEEDED_SD * kernel_sd_s(band_hz)
    step_s = 1 / trials.rate_hz
    beside_s = min(span_s[0] - trials.time_s[0], trials.time_s[-1] - span_s[1]) + step_s
    if beside_s >= needed_s:
        return ""
    return (
        f"trial goes on for {max(beside_s, 0.0) * 1000:.0f} ms beside the span; the phase at "
        f"{sum(band_hz) / 2:g} Hz needs {needed_s * 1000:.0f}"
    )


def _ppc(
    trials: Trials,
    lfp_uv: np.ndarray,
    spikes: SpikesAround,
    band_hz: Span,
    shuffles: Shuffles,
) -> dict[str, float]:
    sample = _nearest_sample(trials, spikes)
    reach = kernel_reach(trials.rate_hz, band_hz)
    first, last = max(sample.min() - reach, 0), sample.max() + reach + 1
    phases = phase_vectors(lfp_uv[:, first:last], rate_hz=trials.rate_hz, band_hz=band_hz)
    counts = _counts(spikes, sample - first, phases.shape[1])
    per_trial = np.bincount(spikes.trial, minlength=spikes.n_trials)
    return phase_estimates(counts @ phases.T, per_trial, shuffles)


def _coherence(
    trials: Trials,
    lfp_uv: np.ndarray,
    inside: np.ndarray,
    spikes: SpikesAround,
    band_hz: Span,
    shuffles: Shuffles,
) -> dict[str, float]:
    # A spike at the edge of the span may be nearest to the sample just outside it.
    sample = np.clip(_nearest_sample(trials, spikes) - inside[0], 0, len(inside) - 1)
    train = _counts(spikes, sample, len(inside)).toarray()
    unit = bands.coefficients(train, rate_hz=trials.rate_hz, band_hz=band_hz)
    field = bands.coefficients(lfp_uv, rate_hz=trials.rate_hz, band_hz=band_hz)
    return coherence_estimates(unit, field, shuffles)


def _nearest_sample(trials: Trials, spikes: SpikesAround) -> np.ndarray:
    """Return the sample of the trial nearest to each spike, shape (n_spikes,)."""
    sample = np.rint((spikes.time_s - trials.time_s[0]) * trials.rate_hz).astype(int)
    return np.clip(sample, 0, len(trials.time_s) - 1)


def _counts(spikes: SpikesAround, sample: np.ndarray, n_times: int) -> csr_array:
    """Return the spikes of each trial at each sample, sparse, shape (n_trials, n_times)."""
    ones = np.ones(len(spikes))
    return csr_array((ones, (spikes.trial, sample)), shape=(spikes.n_trials, n_times))
