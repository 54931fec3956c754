"""The small version of `demo_sessions.py`: two sessions against their truth.

Bounds are those of the full size where a share must be 1, and binomial 99.9 % bounds for two
seeds elsewhere, so that a right tool fails once in a thousand changes.
"""

import pytest
from scipy.stats import binom

from tests.recovery.demo_sessions import pooled, show

N_SEEDS = 2


@pytest.fixture(scope="module")
def total(tmp_path_factory):
    found = pooled(N_SEEDS, tmp_path_factory.mktemp("cells"))
    print(show(found, N_SEEDS))
    return found


def least(share, whole):
    return binom.ppf(0.001, whole, share)


@pytest.mark.calibration
def test_two_demo_sessions_against_their_truth(total):
    assert total["troughs"] == 12 * N_SEEDS
    assert total["troughs within 2 ms"] >= least(0.95, total["troughs"])
    assert total["trough intervals that hold the truth"] >= least(0.93, total["troughs"])
    assert total["onset intervals that hold the truth"] >= least(0.93, total["troughs"])
    assert total["orders right"] >= least(0.95, total["orders"])
    assert total["coupled rows with the wrong leader"] == 0
    assert total["verdicts right"] >= least(0.9, total["verdicts"])
    assert total["dead contacts marked bad"] == total["dead contacts"] == N_SEEDS
    assert total["good contacts marked bad"] == 0
    assert total["artefact trials rejected"] == total["artefact trials"]
    for window in ("early", "late"):
        calls = total[f"calls {window}"]
        assert total[f"calls {window} right"] >= least(0.92, calls)


@pytest.mark.calibration
def test_a_run_that_was_stopped_goes_on(tmp_path):
    (tmp_path / "seed-1.json").write_text('{"troughs": 7}')
    assert pooled(1, tmp_path)["troughs"] == 7
