"""Files come in, recordings, spikes and events go out; results come in, files go out.

Nothing is imported here: readers load only when a session names their format. Callers
import the submodule they need, for example `from lfptools.io.opening import open_session`.
"""
