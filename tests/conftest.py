"""A small simulated session on disk, made once, copied for whoever changes it."""

import shutil

import numpy as np
import pytest

from lfptools.simulate import Scenario, simulate, write_demo

N_TRIALS = 14


@pytest.fixture(scope="session")
def small_session(tmp_path_factory):
    """Folder of a session of 14 trials a condition; do not change it."""
    folder = tmp_path_factory.mktemp("small") / "recording"
    scenario = Scenario(n_trials=N_TRIALS, artefact_share=0.0)
    write_demo(simulate(scenario, rng=np.random.default_rng(1)), folder)
    return folder


@pytest.fixture
def own_session(small_session, tmp_path):
    """Return a copy that a test may spoil."""
    return shutil.copytree(small_session, tmp_path / "recording")
