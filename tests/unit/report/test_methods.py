"""The methods text names this run's numbers and the methods it used, no others."""

from dataclasses import replace

import msgspec

from lfptools.choices import DirectionChoice, LatencyChoice, WindowFor
from lfptools.report.methods import REFERENCES, methods
from tests.report_sessions import N_TRIALS, REJECTED, results


def _cited(text: str) -> set[str]:
    return {key for key, reference in REFERENCES.items() if f"- {reference}" in text}


def test_numbers_are_those_of_the_run():
    text = methods(results())
    assert f"{2 * N_TRIALS + 2} stimuli, {2 * N_TRIALS} accepted trials" in text
    assert f"rejected: {REJECTED}: 2" in text
    assert "from -200 to 300 ms" in text
    assert "early 5 to 60 ms, trough" in text
    assert "S1: CSD at 200 um" in text
    assert "50 % of it" in text
    assert "(0.3 S/m)" in text
    assert "Seed 1;" in text


def test_each_reference_is_cited_in_the_text():
    text = methods(results())
    body = text.partition("## References")[0]
    for key in _cited(text):
        name = REFERENCES[key].split()[0]
        assert name in body, key
    assert len(_cited(text)) >= 10


def test_only_methods_that_were_used_are_cited():
    spikes_only = _cited(methods(results(with_lfp=False)))
    assert {"poisson", "fdr", "bootstrap"} <= spikes_only
    assert not {"csd", "ends", "granger", "reversal", "ppc", "phase_slope"} & spikes_only
    lfp_only = _cited(methods(results(spikes=False)))
    assert {"csd", "ends", "granger", "reversal", "bootstrap"} <= lfp_only
    assert not {"poisson", "ppc"} & lfp_only
    one_area = _cited(methods(results(areas=("S1",), spikes=False)))
    assert one_area == {"bootstrap", "csd", "ends"}


def test_spans_that_areas_have_of_their_own_are_named():
    early, late = results().choices.window
    own = {"M1": WindowFor(span_ms=(20.0, 70.0)), "S1": WindowFor(extremum="peak")}
    windows = [msgspec.structs.replace(early, for_=own), late]
    choices = msgspec.structs.replace(results().choices, window=windows)
    text = methods(replace(results(), choices=choices))
    assert (
        "(early 5 to 60 ms, trough (in M1 20 to 70 ms, trough, in S1 5 to 60 ms, peak); "
        "late 100 to 180 ms, trough)" in text
    )


def test_a_signal_whose_depth_was_given_is_said_to_be():
    assert "chosen once from the average over all conditions and windows." in methods(results())
    s1, m1 = results().cut.areas
    given = replace(s1, signal_depth_um=200.0)
    text = methods(replace(results(), cut=replace(results().cut, areas=(given, m1))))
    assert "(S1: CSD at 200 um, as given, M1: CSD at 200 um)" in text
    assert "from the average over all conditions and windows where not given." in text
    both = (given, replace(m1, signal_depth_um=200.0))
    text = methods(replace(results(), cut=replace(results().cut, areas=both)))
    assert "average over all conditions and windows" not in text


def test_other_choices_change_the_text():
    choices = msgspec.structs.replace(
        results().choices,
        latency=LatencyChoice(onset="quarter", smooth_ms=2.0),
        direction=DirectionChoice(single_trial="keep"),
    )
    text = methods(replace(results(), choices=choices))
    assert "25 % of it" in text
    assert "as set" in text
    assert "projected out" not in text
    assert "projected out" in methods(results())
