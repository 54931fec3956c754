"""Cut trials in memory for the tests of the bench: a rat whose whiskers are deflected.

One wave in S1 and M1, sampled at different rates, and a few spikes; the condition "none" has too
few trials to be estimated.
"""

from contextlib import contextmanager

import numpy as np

from lfptools.choices import AnalysisChoices, ResampleChoice, TrialsChoice, WindowChoice, WindowFor
from lfptools.model import Contacts, CutSession, SpikeTrains, Trials, TrialTable

#: S1 at 2500 Hz, M1 at 1250 Hz: edges lie on multiples of 0.8 ms, as the slower area's samples.
STEP_MS = 0.8
N_TRIALS = 20
EARLY = WindowChoice(
    name="early",
    span_ms=(5.0, 40.0),
    direction_ms=(0.0, 100.0),
    for_={"M1": WindowFor(span_ms=(10.0, 50.0))},
)
LATE = WindowChoice(name="late", span_ms=(100.0, 200.0), extremum="peak")


def area(name, rate_hz):
    time_s = np.arange(-round(0.2 * rate_hz), round(0.3 * rate_hz)) / rate_hz
    depth_um = 100.0 * np.arange(6)
    wave = -200 * np.exp(-0.5 * ((time_s - 0.02) / 0.005) ** 2)
    noise = np.random.default_rng(len(name)).normal(0, 5, (N_TRIALS, 6, len(time_s)))
    return Trials(
        area=name,
        data_uv=(noise + wave * np.exp(-(((depth_um - 250) / 100) ** 2))[:, None]).astype("f4"),
        time_s=time_s,
        rate_hz=rate_hz,
        contacts=Contacts(np.arange(6), depth_um, np.zeros(6, bool), ("",) * 6),
    )


def cut_session(windows=(EARLY, LATE), rates_hz=(2500.0, 1250.0), window_ms=(-200.0, 300.0)):
    names = ("S1", "M1")
    condition = np.array(["none"] * 2 + ["single"] * (N_TRIALS - 2))
    return CutSession(
        name="whisk-01",
        table=TrialTable(
            time_s=np.arange(float(N_TRIALS)), condition=condition, reason=np.full(N_TRIALS, "")
        ),
        areas=tuple(area(*each) for each in zip(names, rates_hz, strict=False)),
        area_names=names,
        choices=AnalysisChoices(
            trials=TrialsChoice(window_ms=window_ms, baseline_ms=(-100.0, 0.0)),
            window=list(windows),
            resample=ResampleChoice(n=99),
        ),
        spikes=SpikeTrains(
            unit=("a", "<b>", "c"),
            area=("S1", "S1", "M1"),
            depth_um=np.full(3, 100.0),
            time_s=(np.array([0.1]), np.array([]), np.array([0.2])),
        ),
    )


CUT = cut_session()


def span(state, name):
    """Return the span of a window as the bench has it."""
    return state.view.window(name).span_ms


@contextmanager
def gesture(state):
    """Take all moves inside the block as one step, whatever becomes of them."""
    state.begin_gesture()
    try:
        yield
    finally:
        state.end_gesture()
