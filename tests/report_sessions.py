"""Small analysed sessions in memory for the tests of figures and reports.

A rat whose whiskers are deflected ("single") or whose whole pad is puffed at ("pad"): a wave in
S1, then in M1, with a sink between two sources; spikes that follow it; the fourth contact of S1
is dead.
"""

from dataclasses import replace
from functools import lru_cache

import msgspec
import numpy as np

from lfptools.analysis import Results, analyse
from lfptools.choices import AnalysisChoices, CouplingChoice, WindowChoice
from lfptools.model import CutSession, SpikeTrains, Trials, TrialTable
from tests.spike_sessions import choices, lfp, session, stimuli_s

N_TRIALS = 12  # of each condition
RATE_HZ = 500.0
#: Potential of the wave by depth, uV: most negative at the third contact.
PROFILE_UV = np.array([0.0, -40.0, -100.0, -40.0, 0.0, 20.0, 10.0])
REJECTED = "amplitude in S1"
PEAK_S = {"S1": 0.020, "M1": 0.030}


def cut_session(
    *,
    areas: tuple[str, ...] = ("S1", "M1"),
    conditions: tuple[str, ...] = ("single", "pad"),
    windows: tuple[str, str] = ("early", "late"),
    unit: str = "u",
    name: str = "whisk",
    spikes: bool = True,
    with_lfp: bool = True,
) -> CutSession:
    """Return trials of the session; its parts can be named and left out."""
    rng = np.random.default_rng(3)
    condition = [each for each in conditions for _ in range(N_TRIALS)]
    peaks = dict(zip(areas, PEAK_S.values(), strict=False))
    chosen = _choices(windows)
    trials = tuple(_trials(area, peak_s, len(condition), rng) for area, peak_s in peaks.items())
    made = session(
        chosen,
        condition=condition,
        areas=trials if with_lfp else (),
        spikes=_spikes(peaks, unit, len(condition), rng) if spikes else None,
        area_names=areas,
    )
    return replace(made, name=name, table=_table(condition))


def _table(condition: list[str]) -> TrialTable:
    """All trials accepted, and two further events that were not."""
    n_events = len(condition) + 2
    return TrialTable(
        time_s=stimuli_s(n_events),
        condition=np.array([*condition, condition[0], condition[0]]),
        reason=np.array([""] * len(condition) + [REJECTED] * 2),
        factors={"whisker": ("C2",) * n_events},
    )


def _choices(windows: tuple[str, str]) -> AnalysisChoices:
    plain = choices(windows={windows[0]: (5, 60), windows[1]: (100, 180)}, n=99)
    return msgspec.structs.replace(
        plain,
        coupling=CouplingChoice(n_shuffles=99),
        window=[
            WindowChoice(name=windows[0], span_ms=(5, 60), direction_ms=(0, 100)),
            WindowChoice(name=windows[1], span_ms=(100, 180)),
        ],
    )


def _trials(area: str, peak_s: float, n_trials: int, rng: np.random.Generator) -> Trials:
    time_s = -0.2 + np.arange(250) / RATE_HZ
    wave = np.exp(-0.5 * ((time_s - peak_s) / 0.006) ** 2)
    wave += 0.6 * np.exp(-0.5 * ((time_s - 0.2 + 3 * peak_s) / 0.012) ** 2)
    data_uv = PROFILE_UV[:, None] * wave
    data_uv = data_uv + rng.normal(0, 8, (n_trials, len(PROFILE_UV), len(time_s)))
    found = lfp(data_uv, rate_hz=RATE_HZ, first_s=-0.2, area=area)
    return replace(
        found,
        contacts=found.contacts.mark(3, "dead: steps of 0.1 uV")
        if area != "M1"
        else found.contacts,
        layers={"L23": (50.0, 250.0), "L4": (250.0, 450.0)},
    )


def _spikes(
    peaks: dict[str, float], unit: str, n_trials: int, rng: np.random.Generator
) -> SpikeTrains:
    times = []
    for peak_s in peaks.values():
        each = [
            np.concatenate([rng.uniform(-0.2, 0.3, 8), rng.normal(peak_s, 0.004, 3)])
            for _ in range(n_trials)
        ]
        times.append(
            np.sort(np.concatenate([s + t for s, t in zip(each, stimuli_s(n_trials), strict=True)]))
        )
    return SpikeTrains(
        unit=tuple(f"{unit}{number}" for number in range(len(peaks))),
        area=tuple(peaks),
        depth_um=np.full(len(peaks), 300.0),
        time_s=tuple(times),
    )


@lru_cache
def results(**options: object) -> Results:
    """Analyse such a session; the same options give the same object."""
    return analyse(cut_session(**options))  # type: ignore[arg-type]
