"""Results in, the methods of this run in words with its numbers and references out (Markdown)."""

from collections.abc import Callable

import numpy as np

from lfptools.analysis.results import Results
from lfptools.choices import WindowChoice
from lfptools.plot.marks import chosen, number
from lfptools.report.manifest import GIVEN, signals, trial_counts, versions
from lfptools.waves import ONSET_FRACTION

#: The published methods a run may use, by key; titles and pages from memory.
REFERENCES = {
    "bootstrap": "Efron B, Tibshirani RJ (1993) An Introduction to the Bootstrap. "
    "Chapman & Hall, New York.",
    "fdr": "Benjamini Y, Hochberg Y (1995) Controlling the false discovery rate: a practical and "
    "powerful approach to multiple testing. J R Stat Soc B 57:289-300.",
    "csd": "Nicholson C, Freeman JA (1975) Theory of current source-density analysis and "
    "determination of conductivity tensor for anuran cerebellum. J Neurophysiol 38:356-368.",
    "ends": "Vaknin G, DiScenna PG, Teyler TJ (1988) A method for calculating current source "
    "density (CSD) analysis without resorting to recording sites outside the sampling volume. "
    "J Neurosci Methods 24:131-135.",
    "poisson": "Maunsell JHR, Gibson JR (1992) Visual response latencies in striate cortex of the "
    "macaque monkey. J Neurophysiol 68:1332-1344.",
    "ppc": "Vinck M, van Wingerden M, Womelsdorf T, Fries P, Pennartz CMA (2010) The pairwise "
    "phase consistency: a bias-free measure of rhythmic neuronal synchronization. NeuroImage "
    "51:112-122.",
    "multitaper": "Thomson DJ (1982) Spectrum estimation and harmonic analysis. Proc IEEE "
    "70:1055-1096.",
    "granger": "Geweke J (1982) Measurement of linear dependence and feedback between multiple "
    "time series. J Am Stat Assoc 77:304-313.",
    "reversal": "Haufe S, Nikulin VV, Müller KR, Nolte G (2013) A critical assessment of "
    "connectivity measures for EEG data: a simulation study. NeuroImage 64:120-133.",
    "reversal_valid": "Winkler I, Panknin D, Bartz D, Müller KR, Haufe S (2016) Validity of time "
    "reversal for testing Granger causality. IEEE Trans Signal Process 64:2746-2760.",
    "phase_slope": "Nolte G, Ziehe A, Nikulin VV, Schlögl A, Krämer N, Brismar T, Müller KR "
    "(2008) Robustly estimating the flow direction of information in complex physical systems. "
    "Phys Rev Lett 100:234101.",
}
Part = tuple[str, tuple[str, ...]]  # a paragraph and the references it makes


def methods(results: Results) -> str:
    """Return what was done in this run and no more, as Markdown."""
    parts: list[Callable[[Results], Part | None]] = [
        _trials, _signals, _waves, _depth, _firing, _coupling, _direction, _software,
    ]  # fmt: skip
    said = [part for part in (each(results) for each in parts) if part is not None]
    used = dict.fromkeys(key for _, keys in said for key in keys)
    lines = ["# Methods", "", "\n\n".join(text for text, _ in said), ""]
    if used:
        cited = sorted(REFERENCES[key] for key in used)
        lines += ["## References", "", *[f"- {each}" for each in cited], ""]
    return "\n".join(lines)


def _span(span_ms: tuple[float, float]) -> str:
    return f"{span_ms[0]:g} to {span_ms[1]:g} ms"


def _own(window: WindowChoice) -> str:
    """Return the spans and signs that areas have of their own."""
    said = ", ".join(
        f"in {area} {_span(own.span_ms or window.span_ms)}, {own.extremum or window.extremum}"
        for area, own in window.for_.items()
    )
    return f" ({said})" if said else ""


def _has(results: Results, table: str, column: str, **wanted: str) -> bool:
    """Whether a table holds a value in `column`."""
    rows = chosen(results.rows[table], **wanted)
    return any(np.isfinite(number(row, column)) for row in rows)


def _trials(results: Results) -> Part:
    choices, counts = results.choices, trial_counts(results)
    by_condition = ", ".join(
        f"{name} {count}" for name, count in counts["accepted_by_condition"].items()
    )
    why = ", ".join(f"{name}: {count}" for name, count in counts["rejected_by_reason"].items())
    text = (
        f"Session {results.session}: {counts['events']} stimuli, {counts['accepted']} accepted "
        f"trials ({by_condition}); rejected: {why or 'none'}. Trials reached from "
        f"{_span(choices.trials.window_ms)} around the stimulus."
    )
    if results.cut.areas:
        text += (
            f" The mean over the baseline, {_span(choices.trials.baseline_ms)}, was taken off each "
            "channel of each trial. A trial was rejected for all areas together where the log "
            "peak-to-peak amplitude of any good contact lay more than "
            f"{choices.clean.amplitude_sd:g} robust standard deviations above the median of its "
            "condition. A contact was taken for bad where its sample-to-sample noise was smaller, "
            "or beside its most similar neighbour larger, than the array's median by a factor of "
            f"{choices.clean.contact_factor:g}, or where it was listed as bad."
        )
    return text, ()


def _signals(results: Results) -> Part | None:
    found = signals(results)
    if not found:
        return None
    listed = ", ".join(
        f"{each['area']}: {each['signal'].upper()} at {each['depth_um']:g} um"
        + (", as given" if each["chosen"].startswith(GIVEN) else "")
        for each in found
    )
    given = [each["chosen"].startswith(GIVEN) for each in found]
    chosen_from = "chosen once from the average over all conditions and windows"
    how_chosen = "" if all(given) else f", {chosen_from}" + (" where not given" * any(given))
    auto = results.choices.latency.smooth_ms == "auto"
    how = "one a window for all areas and conditions, by least estimated risk" if auto else "as set"
    widths = ", ".join(f"{name} {1000 * sd_s:g} ms" for name, sd_s in results.smooth_s.items())
    text = f"One signal stood for each area in all windows ({listed}){how_chosen}."
    if widths:
        text += (
            " It was smoothed without delay by a Gaussian whose leading bias was taken off "
            f"(standard deviation: {widths}; {how})."
        )
    return text, ()


def _waves(results: Results) -> Part | None:
    if not results.rows["latencies"]:
        return None
    choices = results.choices
    windows = "; ".join(
        f"{each.name} {_span(each.span_ms)}, {each.extremum}{_own(each)}"
        + ("" if each.chosen == "before" else ", chosen on these trials")
        for each in choices.window
    )
    percent = 100 * ONSET_FRACTION[choices.latency.onset]
    text = (
        f"In each window ({windows}) the largest local extremum of the average was refined by a "
        f"parabola; its onset is where the flank last crossed {percent:g} % of it. A wave counts "
        "as found where the prominence of the average exceeded that of averages of trials with "
        f"random signs (p <= .05, {choices.resample.n} sign flips). Intervals are percentile "
        f"intervals of {choices.resample.n} bootstrap resamples of trials at level "
        f"{choices.resample.level:g} (Efron and Tibshirani 1993), expanded for few trials."
    )
    keys = ["bootstrap"]
    if _has(results, "lags", "q"):
        text += (
            " Lags between areas were paired on the same resamples; q is the false discovery rate "
            "over the table (Benjamini and Hochberg 1995)."
        )
        keys.append("fdr")
    return text, tuple(keys)


def _depth(results: Results) -> Part | None:
    if not results.maps:
        return None
    text = (
        "Current source density is minus the conductivity "
        f"({results.choices.csd.conductivity_s_m:g} S/m) times the second spatial derivative of "
        "the potential (Nicholson and Freeman 1975), bad contacts filled in along depth by a "
        "cubic spline and the outermost contacts duplicated (Vaknin et al. 1988). Sinks are "
        "negative. The strongest sink and source of each window are given with bootstrap "
        "intervals of depth and time."
    )
    return text, ("csd", "ends", "bootstrap")


def _firing(results: Results) -> Part | None:
    if not results.rows["firing"]:
        return None
    text = (
        "Firing in each window was compared with the baseline by sign flips of the trials' "
        "differences in rate; rises and falls are called at q <= .05 (Benjamini and Hochberg "
        "1995)."
    )
    keys = ["fdr", "bootstrap"]
    if _has(results, "firing", "latency_ms"):
        text += (
            " The latency is the left edge of the first of three consecutive bins of "
            f"{results.choices.rates.bin_ms:g} ms beyond the baseline by the Poisson criterion "
            "(Maunsell and Gibson 1992; p < .01, .01, .05)."
        )
        keys.append("poisson")
    text += " Intervals are bootstrap intervals over trials (Efron and Tibshirani 1993)."
    return text, tuple(keys)


def _coupling(results: Results) -> Part | None:
    said, keys = [], []
    if _has(results, "coupling", "value", measure="ppc"):
        said.append("the pairwise phase consistency (Vinck et al. 2010)")
        keys.append("ppc")
    if _has(results, "coupling", "value", measure="coherence"):
        said.append("multitaper coherence (Thomson 1982)")
        keys.append("multitaper")
    if not said:
        return None
    text = (
        f"Units and the local field ({results.choices.coupling.field}) were related by "
        f"{' and '.join(said)}, against {results.choices.coupling.n_shuffles} shuffles of the "
        "trials, which keep what both owe to the stimulus."
    )
    return text, tuple(keys)


def _direction(results: Results) -> Part | None:
    if not _has(results, "verdicts", "net"):
        return None
    rows = chosen(results.rows["direction"], measure="granger_minus_reversed")
    orders = sorted({int(order) for row in rows if np.isfinite(order := number(row, "order"))})
    kept = results.choices.direction.single_trial == "keep"
    text = (
        "Direction was estimated on trials without their ensemble mean"
        + ("" if kept else ", gain and shift of the evoked response projected out of each")
        + ", areas at one rate through the same filter, by Granger causality (Geweke 1982; "
        "largest autoregressive order "
        f"{', '.join(map(str, orders))}) minus that of reversed time (Haufe et al. 2013; Winkler "
        f"et al. 2016). A lead is claimed where {results.choices.resample.n} random time "
        "reversals of trials give q <= .05 (Benjamini and Hochberg 1995) and the net changes sign "
        "in reversed time; its interval is a jackknife over trials."
    )
    keys = ["granger", "reversal", "reversal_valid", "fdr"]
    if _has(results, "direction", "net", measure="phase_slope"):
        text += (
            " The phase slope (Nolte et al. 2008) of multitaper spectra (Thomson 1982) is given "
            "beside it."
        )
        keys += ["phase_slope", "multitaper"]
    return text, tuple(keys)


def _software(results: Results) -> Part:
    found = versions()
    listed = ", ".join(f"{name} {found[name]}" for name in ("lfptools", "numpy", "scipy", "python"))
    return f"Seed {results.choices.resample.seed}; {listed}.", ()
