"""Settings come in; a session with known truth goes out, in memory or as recording files."""

from lfptools.simulate.recording import Simulated, SimulatedArea, simulate
from lfptools.simulate.scenario import Scenario
from lfptools.simulate.write import write_demo

__all__ = ["Scenario", "Simulated", "SimulatedArea", "simulate", "write_demo"]
