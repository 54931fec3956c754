"""The state of the bench over cut trials in memory."""

import pytest

from lfpwidgets.state import BenchState
from tests.bench_sessions import CUT


@pytest.fixture
def state():
    return BenchState(CUT)
