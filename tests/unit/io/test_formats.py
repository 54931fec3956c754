"""The table of formats, and that nothing heavy loads before a session names its format."""

import subprocess
import sys

import pytest

from lfptools.io.formats import FORMATS, SAMPLE_KEYS, holding


def test_every_reader_named_in_the_table_is_there():
    for name, each in FORMATS.items():
        assert each.name == name
        for of in ("signals", "units"):
            assert (of in each.carries) == (name in holding(of))
            if of in each.carries:
                assert callable(each.reader(of))
            else:
                with pytest.raises(ValueError, match=f"format {name} holds no {of}"):
                    each.reader(of)
    assert FORMATS["raw"].needs == SAMPLE_KEYS


@pytest.mark.parametrize("module", ["formats", "session_file", "opening", "tables"])
def test_no_reader_library_loads_early(module):
    heavy = {"neo", "h5py", "pandas", "mne", "scipy", "pynwb", "matplotlib"}
    code = f"import sys, lfptools.io.{module}; print(*sys.modules)"
    loaded = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True
    )
    assert not heavy & set(loaded.stdout.split())
