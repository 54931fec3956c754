"""Who may import whom, what `import lfptools` must not load, and the public names."""

import ast
import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

import lfptools

ROOT = Path(lfptools.__file__).parent
#: In a checkout the folder widgets/ holds it; an installed wheel has it beside lfptools.
WIDGETS = next(
    path
    for path in (ROOT.parent / "widgets" / "lfpwidgets", ROOT.parent / "lfpwidgets")
    if path.exists()
)

#: Left to right, never back. Names in one group may not import each other unless BETWEEN says so.
ORDER = [
    {"errors"}, {"units"}, {"checks"}, {"choices"}, {"model"}, {"columns"}, {"forward"}, {"io"},
    {"simulate"}, {"clean"}, {"trials"}, {"cut_cache"}, {"resample"},
    {"evoked", "waves", "components", "csd", "layers", "spikes", "bands", "firing_latency",
     "rate_change", "rates", "spike_field", "coupling", "direction"},
    {"contrast", "information"}, {"analysis"}, {"evidence"}, {"sensitivity", "plan"}, {"plot"},
    {"report"}, {"study"}, {"cli"},
]  # fmt: skip
RANK = {name: rank for rank, group in enumerate(ORDER) for name in group}
BETWEEN = {
    "waves": {"evoked"},
    "components": {"waves"},
    "layers": {"csd", "waves"},
    "firing_latency": {"spikes"},
    "rate_change": {"spikes"},
    "rates": {"spikes", "firing_latency", "rate_change"},
    "spike_field": {"spikes", "bands"},
    "coupling": {"spikes", "spike_field", "bands"},
    "direction": {"bands"},
}
#: Alone in knowing these libraries.
ONLY_IN = {
    "neo": {"io"},
    "h5py": {"io"},
    "mne": {"io", "layers", "clean", "contrast"},
    "matplotlib": {"plot", "report"},
    "jinja2": {"report"},
    "rich": {"cli"},
    "tomlkit": {"io"},
}
HEAVY = [
    "matplotlib", "scipy.signal", "scipy.stats", "pandas", "neo", "mne", "h5py", "jinja2",
    "ipywidgets", "dask", "xarray",
]  # fmt: skip


def modules():
    return sorted(path for path in ROOT.rglob("*.py") if path.name != "__main__.py")


def part_of(path):
    relative = path.relative_to(ROOT)
    return relative.parts[0].removesuffix(".py")


def imported(path):
    """Full names of what a file imports, inside functions too."""
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and node.module:
            if node.module == "lfptools":
                yield from (f"lfptools.{alias.name}" for alias in node.names)
            else:
                yield node.module


def test_every_part_has_a_place_in_the_order():
    parts = {part_of(path) for path in modules()} - {"__init__"}
    assert parts <= set(RANK), f"give {parts - set(RANK)} a place in ORDER"


@pytest.mark.parametrize("path", modules(), ids=lambda path: str(path.relative_to(ROOT)))
def test_imports_go_one_way(path):
    part = part_of(path)
    if part == "__init__":
        return
    for name in imported(path):
        if not name.startswith("lfptools."):
            continue
        other = name.split(".")[1]
        allowed = other == part or RANK[other] < RANK[part] or other in BETWEEN.get(part, ())
        assert allowed, f"{part} imports {other}"


@pytest.mark.parametrize("path", modules(), ids=lambda path: str(path.relative_to(ROOT)))
def test_libraries_stay_where_they_belong(path):
    for name in imported(path):
        owners = ONLY_IN.get(name.split(".")[0])
        assert owners is None or part_of(path) in owners, f"{name} in {part_of(path)}"


def test_widgets_do_not_import_the_command_line():
    for path in WIDGETS.rglob("*.py"):
        assert not [name for name in imported(path) if name.startswith("lfptools.cli")]


def loaded_by(code):
    shown = f"import sys, json\n{code}\nprint(json.dumps(sorted(sys.modules)))"
    # Works from a checkout and from an installed wheel alike.
    where = os.pathsep.join([str(ROOT.parent), str(WIDGETS.parent)])
    done = subprocess.run(
        [sys.executable, "-c", shown],
        capture_output=True,
        text=True,
        check=True,
        env=os.environ | {"PYTHONPATH": where},
    )
    return set(json.loads(done.stdout.splitlines()[-1]))


@pytest.mark.parametrize(
    "code",
    [
        "import lfptools",
        "import lfptools.cli; lfptools.cli.parser().format_help()",
        "import lfpwidgets",
    ],
)
def test_import_loads_nothing_heavy(code):
    loaded = loaded_by(code)
    assert not [name for name in HEAVY if name in loaded]


def test_public_names():
    assert lfptools.__all__ == [
        "CutSession", "InputError", "LfptoolsError", "OutputError", "ReaderError", "Results",
        "Session", "SessionFileError", "analyse", "cut_trials", "open_session",
        "read_session_file", "stream_average", "write_results",
    ]  # fmt: skip


@pytest.mark.parametrize("name", sorted(set(lfptools.__all__) - {"write_results"}))
def test_public_names_resolve(name):
    assert getattr(lfptools, name).__doc__


def test_unknown_name_is_an_attribute_error():
    with pytest.raises(AttributeError, match="has no attribute 'nothing_of_the_kind'"):
        lfptools.nothing_of_the_kind  # noqa: B018
