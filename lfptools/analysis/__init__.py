"""One session and its choices in, all results out; no files.

Session --cut--> CutSession --prepare--> signals by area, one smoothing, shared resamples
                               |-- arrival     latencies, lags
                               |-- depth       sinks
                               |-- firing      rates, coupling
                               '-- direction   estimates, verdicts
"""

from lfptools.analysis.results import Results
from lfptools.analysis.run import analyse

__all__ = ["Results", "analyse"]
