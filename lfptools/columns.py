"""The columns of every table, in order: the contract between analyses, files and readers.

Later versions add columns at the end.
"""

COLUMNS: dict[str, tuple[str, ...]] = {
    "trials": ("session", "trial", "event_time_s", "condition", "accepted", "reason"),
    "latencies": (
        "session", "area", "role", "signal", "condition", "window", "extremum", "channel",
        "depth_um", "n_trials", "time_ms", "time_lo_ms", "time_hi_ms", "onset_ms", "onset_lo_ms",
        "onset_hi_ms", "amplitude", "amplitude_lo", "amplitude_hi", "unit", "found", "p", "note",
    ),
    "lags": (
        "session", "area_a", "signal_a", "area_b", "signal_b", "condition", "window", "feature",
        "difference_ms", "lo_ms", "hi_ms", "p", "q", "n_trials", "note",
    ),
    "sinks": (
        "session", "area", "condition", "window", "kind", "depth_um", "depth_lo_um",
        "depth_hi_um", "extent_um", "onset_ms", "onset_lo_ms", "onset_hi_ms", "peak_ms",
        "peak_lo_ms", "peak_hi_ms", "density_ua_mm3", "p", "p_earliest", "layer", "method",
        "radius_um", "n_trials", "note",
    ),
    "firing": (
        "session", "area", "unit", "depth_um", "condition", "window", "n_trials", "n_spikes",
        "baseline_hz", "window_hz", "change_hz", "lo_hz", "hi_hz", "p", "q", "call",
        "latency_ms", "latency_lo_ms", "latency_hi_ms", "latency_method", "note",
    ),
    "coupling": (
        "session", "area", "unit", "field_area", "field_channel", "condition", "window", "band",
        "band_lo_hz", "band_hi_hz", "measure", "value", "lo", "hi", "null", "p", "q",
        "phase_deg", "phase_lo_deg", "phase_hi_deg", "n_spikes", "n_trials", "note",
    ),
    "direction": (
        "session", "area_a", "signal_a", "area_b", "signal_b", "given", "condition", "window",
        "span_lo_ms", "span_hi_ms", "band", "measure", "a_to_b", "b_to_a", "net", "lo", "hi",
        "p", "q", "order", "n_trials", "note",
    ),
    "verdicts": (
        "session", "area_a", "area_b", "condition", "window", "verdict", "leader", "net", "lo",
        "hi", "q", "smallest_detectable", "control", "reason", "caveat", "n_trials",
    ),
}  # fmt: skip
