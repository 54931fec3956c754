"""The session file: what is read, and that every mistake is named with key, found and needed."""

import re

import pytest

from lfptools.errors import OutputError, SessionFileError
from lfptools.io.session_file import read_session_file, write_session_file


def test_reads_choices_and_root(bare):
    found = read_session_file(bare / "session.toml")
    assert found.root == bare.resolve()
    assert found.choices.session == "whisk-01"
    assert [area.name for area in found.choices.area] == ["S1", "M1"]
    early, late = found.choices.window
    assert early.span_s("M1") == (0.010, 0.050)
    assert early.span_s("S1") == (0.005, 0.040)
    assert late.extremum_in("S1") == "peak"
    assert not late.holds("M1")


def test_defaults_follow_the_only_clock(bare, session_text):
    text = session_text.replace('clock = "rig"\n\n[trials]', "\n[trials]")
    (bare / "session.toml").write_text(text)
    assert read_session_file(bare / "session.toml").choices.events.clock is None


def test_layers_that_touch_do_not_overlap(bare, session_text):
    text = session_text.replace("L4 = [100, 250]", "L5 = [250, 300], L4 = [100, 250]")
    (bare / "session.toml").write_text(text)
    (area, _) = read_session_file(bare / "session.toml").choices.area
    assert area.layers == {"L5": (250.0, 300.0), "L4": (100.0, 250.0)}


@pytest.mark.parametrize(
    ("signal", "depth_um", "refused"),
    [("csd", 0, True), ("csd", 100, False), ("csd", 430, True), ("lfp", 0, False)],
)
def test_an_outermost_contact_carries_no_current(bare, session_text, signal, depth_um, refused):
    # 5 good contacts, so that the area has current source density, at 0 to 400 um.
    text = session_text.replace('channels = "0-3"\n', 'channels = "0-4"\n', 1)
    text = text.replace(
        "pitch_um = 100\nbad = [2]", f"pitch_um = 100\nsignal_depth_um = {depth_um}"
    )
    (bare / "session.toml").write_text(f'{text}\n[direction]\nsignal = "{signal}"\n')
    if not refused:
        choices = read_session_file(bare / "session.toml").choices
        assert choices.area[0].signal_depth_um == depth_um
        return
    with pytest.raises(
        SessionFileError, match=r"area\[0\]\.signal_depth_um \(S1\) .* 100, 200, 300"
    ):
        read_session_file(bare / "session.toml")


@pytest.mark.parametrize(
    ("line", "hint"),
    [
        ("format = spikeglx", '; text needs quotes: "spikeglx"'),
        ("areas = [S1, M1] # both", '; text needs quotes: "S1"'),
        ("layers = { L4 = deep }", '; text needs quotes: "deep"'),
        ("file = C:\\data\\a.csv", '; text needs quotes: "C:\\data\\a.csv"'),
        ("paired = True", "; needed is true"),
        ("gain_uv = .195", ""),
        ("[[source]", ""),
    ],
)
def test_a_word_without_quotes_is_told(line, hint, tmp_path):
    path = tmp_path / "session.toml"
    path.write_text(f'session = "whisk"\n{line}\n')
    with pytest.raises(SessionFileError, match="is not valid TOML: ") as caught:
        read_session_file(path)
    assert str(caught.value).partition(")")[2] == hint
    assert "line 2" in str(caught.value)


def test_a_folder_is_no_session_file(tmp_path):
    with pytest.raises(SessionFileError, match="is a folder; needed is the session file"):
        read_session_file(tmp_path)


def refuse(bare, session_text, old, new):
    """Read the session file with `old` replaced and return the message of its refusal."""
    assert session_text.count(old) >= 1, old
    (bare / "session.toml").write_text(session_text.replace(old, new, 1))
    with pytest.raises(SessionFileError) as caught:
        read_session_file(bare / "session.toml")
    return str(caught.value)


# (text replaced, by what, key as the message names it, what was found, what is needed)
DECODING = [
    ("pitch_um = 100", "pitch = 100", "area[0].pitch (S1)", "no key of [[area]]", "pitch_um"),
    ("subject =", "animal =", "animal", "no key of a session file", "subject"),
    ("[events]", "[events]\nfiles = 1", "events.files", "no key of [events]", "file, clock"),
    ("[trials]", "[trial]", "trial", "no key of a session file", "trials"),
    ("span_ms = [10, 50]", "spans = [1, 2]", "window[0].for.M1.spans (early)",
     "no key of [window.for.M1]", "extremum"),
    ('name = "S1"\n', "", "area[0].name", "missing", "a text"),
    ("window_ms = [-200, 300]\n", "", "trials.window_ms", "missing", "a list of 2 numbers"),
    ("pitch_um = 100", 'pitch_um = "wide"', "area[0].pitch_um (S1)", "the text 'wide'",
     "a number above 0"),
    ("pitch_um = 100", "pitch_um = -3", "area[0].pitch_um (S1)", "the number -3",
     "a number above 0"),
    ("pitch_um = 100", "pitch_um = 0", "area[0].pitch_um (S1)", "the number 0",
     "a number above 0"),
    ("pitch_um = 100", "pitch_um = inf", "area[0].pitch_um (S1)", "inf", "a finite number"),
    ("pitch_um = 100", "pitch_um = true", "area[0].pitch_um (S1)", "true", "a number above 0"),
    ("pitch_um = 100", "pitch_um = 2024-01-01", "area[0].pitch_um (S1)", "the date 2024-01-01",
     "a number above 0"),
    ('name = "S1"', "name = 1", "area[0].name", "the number 1", "a text"),
    ('name = "S1"', 'name = ""', "area[0].name", "the text ''", "not empty"),
    ("bad = [2]", "bad = 2", "area[0].bad (S1)", "the number 2", "a list, each part a whole"),
    ("bad = [2]", 'bad = ["x"]', "area[0].bad[0] (S1)", "the text 'x'", "a whole number"),
    ("L4 = [100, 250]", "L4 = [100]", "area[0].layers.L4 (S1)", "the list [100]",
     "a list of 2 numbers"),
    ("L4 = [100, 250]", 'L4 = [1, 2], L5 = [1, "x"]', "area[0].layers.L5[1] (S1)",
     "the text 'x'", "a number"),
    ("span_ms = [5, 40]", "span_ms = 5", "window[0].span_ms (early)", "the number 5",
     "a list of 2 numbers"),
    ('extremum = "peak"', 'extremum = "valley"', "window[1].extremum (late)", "the text 'valley'",
     "one of 'peak', 'trough'"),
    ('extremum = "peak"', "extremum = 3", "window[1].extremum (late)", "the number 3",
     "one of 'peak', 'trough'"),
    ("[events]", "[resample]\nn = 10\n[events]", "resample.n", "the number 10",
     "a whole number at least 99 and at most 100000"),
    ("[events]", "[latency]\nsmooth_ms = 'x'\n[events]", "latency.smooth_ms", "the text 'x'",
     "'auto' or a number at least 0"),
    ("[events]", "[[events]]", "events", "a list of 1 tables", "a table"),
    ("[[units]]\narea = \"S1\"\nsource = \"m1\"\nkeep = [\"good\"]\n\n[[units]]", "[units]",
     "units", "a table", "a list of tables"),
]  # fmt: skip


@pytest.mark.parametrize(("old", "new", "key", "found", "needed"), DECODING)
def test_decoding_errors_name_key_found_needed(bare, session_text, old, new, key, found, needed):
    message = refuse(bare, session_text, old, new)
    assert message.startswith(f"{bare / 'session.toml'}: {key} ")
    assert found in message
    assert needed in message


RAW = 'format = "raw"\nrate_hz = 1000\nn_channels = 4\ngain_uv = 0.5\ndtype = "int16"'
CONTRADICTIONS = [
    ('name = "m1"\n', 'name = "s1_lfp"\n', "source[1].name (s1_lfp)", "'s1_lfp'", "source[0]"),
    ('name = "M1"\n', 'name = "S1"\n', "area[1].name (S1)", "'S1'", "area[0]"),
    ('name = "late"', 'name = "early"', "window[1].name (early)", "'early'", "window[0]"),
    ('name = "M1"\n', 'name = "same"\n', "area[1].name", "'same'", "words of coupling.field"),
    ('format = "nwb"', 'format = "zip"', "source[1].format (m1)", "'zip'",
     "one of spikeglx, nwb, raw, table"),
    ('format = "spikeglx"', RAW.replace("rate_hz = 1000\n", ""), "source[0].rate_hz (s1_lfp)",
     "missing", "rate_hz, n_channels, gain_uv, dtype"),
    ('format = "spikeglx"', RAW.replace("n_channels = 4\n", ""), "source[0].n_channels (s1_lfp)",
     "missing", "rate_hz, n_channels, gain_uv, dtype"),
    ('format = "spikeglx"', RAW.replace("gain_uv = 0.5\n", ""), "source[0].gain_uv (s1_lfp)",
     "missing", "rate_hz, n_channels, gain_uv, dtype"),
    ('format = "spikeglx"', RAW.replace('dtype = "int16"', ""), "source[0].dtype (s1_lfp)",
     "missing", "rate_hz, n_channels, gain_uv, dtype"),
    ('format = "spikeglx"', RAW.replace("0.5", "0"), "source[0].gain_uv (s1_lfp)", "0.0",
     "other than 0"),
    ('format = "spikeglx"', RAW.replace("int16", "O"), "source[0].dtype (s1_lfp)", "'O'",
     "'int16'"),
    ('format = "spikeglx"', RAW.replace("int16", "short int"), "source[0].dtype (s1_lfp)",
     "'short int'", "'int16'"),
    ('format = "nwb"', 'format = "nwb"\nrate_hz = 3', "source[1].rate_hz (m1)", "3",
     "files of format 'nwb' carry it"),
    ('format = "nwb"', 'format = "nwb"\namplifier_hz = [500, 1]', "source[1].amplifier_hz (m1)",
     "[500.0, 1.0]", "low below high"),
    ('source = "s1_lfp"', 'source = "s2"', "area[0].source (S1)", "'s2'", "s1_lfp, m1"),
    ('source = "s1_lfp"\n', "", "area[0].source (S1)", "missing", "channels is given"),
    ('format = "nwb"', 'format = "table"', "area[1].source (M1)", "'m1'",
     "a source of format spikeglx or nwb or raw"),
    ('channels = "0-3"\n', "", "area[0].channels (S1)", "missing", "'0-15'"),
    ('channels = "0-3"', 'channels = "0:3"', "area[0].channels (S1)", "'0:3'", "'0-7,9-15'"),
    ('channels = "0-3"', "channels = []", "area[0].channels (S1)", "[]", "at least one"),
    ('channels = "0-3"', 'channels = "0-3,2"', "area[0].channels (S1)", "channel 2 twice",
     "each channel once"),
    ('channels = "0-3"', "channels = [0, -1]", "area[0].channels (S1)", "channel -1",
     "count from 0"),
    ("pitch_um = 100\n", "", "area[0].pitch_um and area[0].depths_um (S1)", "missing",
     "exactly one"),
    ("pitch_um = 100", "pitch_um = 100\ndepths_um = [0, 1, 2, 3]",
     "area[0].pitch_um and area[0].depths_um (S1)", "given", "exactly one"),
    ("pitch_um = 100", 'contacts_file = "a.json"', "area[0].contacts_file (S1)",
     "not available yet", "pitch_um or depths_um"),
    ("depths_um = [0, 100, 250, 300]", "depths_um = [0, 100, 250]", "area[1].depths_um (M1)",
     "lists 3", "needed are 4"),
    ("depths_um = [0, 100, 250, 300]", "depths_um = [300, 250, 100, 0]", "area[1].depths_um (M1)",
     "[300.0, 250.0, 100.0, 0.0]", "strictly rising"),
    ("depths_um = [0, 100, 250, 300]", "depths_um = [0, 100, 100, 300]", "area[1].depths_um (M1)",
     "[0.0, 100.0, 100.0, 300.0]", "strictly rising"),
    ("depths_um =", "first_depth_um = 50\ndepths_um =", "area[1].first_depth_um (M1)", "50",
     "depths_um already counts"),
    ("bad = [2]", "bad = [2, 9]", "area[0].bad (S1)", "[2, 9]", "channel 9 is not in '0-3'"),
    ("L4 = [100, 250]", "L4 = [250, 100]", "area[0].layers.L4 (S1)", "[250.0, 100.0]",
     "first below last"),
    ("L4 = [100, 250]", "L4 = [100, 250], L5 = [240, 300], L23 = [0, 90]",
     "area[0].layers.L5 (S1)", "[240.0, 300.0]", "does not overlap L4, [100.0, 250.0]"),
    ("pitch_um = 100", "pitch_um = 100\nsignal_depth_um = 200", "area[0].signal_depth_um (S1)",
     "200.0", "0, 100, 300"),  # contact 2, at 200 um, is listed as bad
    ("pitch_um = 100", "pitch_um = 100\nsignal_depth_um = 351", "area[0].signal_depth_um (S1)",
     "351.0", "0, 100, 300"),
    ("depths_um = [0", "signal_depth_um = -51\ndepths_um = [0", "area[1].signal_depth_um (M1)",
     "-51.0", "0, 100, 250, 300"),
    ('source = "s1_lfp"\nchannels = "0-3"\npitch_um = 100\nbad = [2]', "signal_depth_um = 0",
     "area[0].source (S1)", "missing", "signal_depth_um is given"),
    ('source = "m1"\nchannels', 'source = "s1_lfp"\nchannels', "area[1].channels (M1)",
     "channel 3", "each channel in one area"),
    ('area = "S1"', 'area = "S3"', "units[0].area", "'S3'", "S1, M1"),
    ('source = "m1"\nkeep', 'source = "x"\nkeep', "units[0].source (S1)", "'x'", "s1_lfp, m1"),
    ('source = "m1"\nkeep', 'source = "s1_lfp"\nkeep', "units[0].source (S1)", "holds no units",
     "nwb or table"),
    ('area = "M1"', 'area = "S1"', "units[1].source (S1)", "'m1'", "already listed"),
    ('keep = ["good"]', "keep = []", "units[0].keep (S1)", "[]", "at least one label"),
    ('path = "m1.nwb"\nclock = "rig"', 'path = "m1.nwb"', "area[1].source (M1)",
     "clock 'm1' and area[0].source (S1) on clock 'rig'", "the same `clock`"),
    ('file = "events.csv"\nclock = "rig"', 'file = "events.csv"\nclock = "wall"', "events.clock",
     "'wall'", "rig"),
    ("baseline_ms = [-100, 0]", "baseline_ms = [-300, 0]", "trials.baseline_ms", "[-300.0, 0.0]",
     "inside trials.window_ms, [-200.0, 300.0]"),
    ("baseline_ms = [-100, 0]", "baseline_ms = [0, -100]", "trials.baseline_ms", "[0.0, -100.0]",
     "first below last"),
    ("window_ms = [-200, 300]", "window_ms = [300, -200]", "trials.window_ms", "[300.0, -200.0]",
     "first below last"),
    ("span_ms = [5, 40]", "span_ms = [40, 5]", "window[0].span_ms (early)", "[40.0, 5.0]",
     "first below last"),
    ("span_ms = [5, 40]", "span_ms = [5, 400]", "window[0].span_ms (early)", "[5.0, 400.0]",
     "inside trials.window_ms"),
    ("direction_ms = [0, 100]", "direction_ms = [0, 301]", "window[0].direction_ms (early)",
     "[0.0, 301.0]", "inside trials.window_ms"),
    ("span_ms = [10, 50]", "span_ms = [10, 500]", "window[0].for.M1.span_ms (early)",
     "[10.0, 500.0]", "inside trials.window_ms"),
    ("[window.for.M1]", "[window.for.M2]", "window[0].for.M2 (early)", "no area", "S1, M1"),
    ('areas = ["S1"]', 'areas = ["S2"]', "window[1].areas (late)", "'S2'", "S1, M1"),
    ('areas = ["S1"]', 'areas = ["S1"]\nfor = { M1 = { extremum = "peak" } }',
     "window[1].for.M1 (late)", "no area of this window", "S1"),
    ("[trials]", "[coupling]\nbands_hz = { beta = [30, 13] }\n[trials]", "coupling.bands_hz.beta",
     "[30.0, 13.0]", "low below high"),
    ("[trials]", "[direction]\nbands_hz = { low = [0, 4] }\n[trials]", "direction.bands_hz.low",
     "[0.0, 4.0]", "above 0"),
    ("[trials]", "[direction]\nbands_hz = { all = [1, 4] }\n[trials]", "direction.bands_hz.all",
     "all frequencies", "another name"),
    ("[trials]", '[coupling]\nfield = "S3"\n[trials]', "coupling.field", "'S3'",
     "neighbour, same, S1, M1"),
    ('clock = "rig"\n\n[trials]', "drop = [-1]\n\n[trials]", "events.drop", "[-1]",
     "counted from 0"),
]  # fmt: skip


@pytest.mark.parametrize(("old", "new", "key", "found", "needed"), CONTRADICTIONS)
def test_contradictions_name_key_found_needed(bare, session_text, old, new, key, found, needed):
    message = refuse(bare, session_text, old, new)
    assert message.startswith(f"{bare / 'session.toml'}: {key}")
    assert found in message
    assert needed in message


def test_events_need_a_clock_where_there_are_several(bare, session_text):
    extra = '[[source]]\nname = "other"\nformat = "nwb"\npath = "m1.nwb"\n\n[events]'
    text = session_text.replace('file = "events.csv"\nclock = "rig"', 'file = "events.csv"')
    message = refuse(bare, text, "[events]", extra)
    assert "events.clock is missing" in message
    assert "rig, other" in message


def test_events_on_a_clock_that_nothing_joins(bare, session_text):
    extra = '[[source]]\nname = "other"\nformat = "nwb"\npath = "m1.nwb"\n\n[events]'
    text = session_text.replace("[events]", extra)
    message = refuse(bare, text, 'csv"\nclock = "rig"', 'csv"\nclock = "other"')
    assert "events.clock is 'other' and the recordings are on clock 'rig'" in message


def test_units_on_a_clock_that_nothing_joins(bare, session_text):
    extra = '[[source]]\nname = "sorted"\nformat = "nwb"\npath = "m1.nwb"\n\n[[area]]'
    text = session_text.replace("[[area]]", extra, 1)
    message = refuse(bare, text, 'source = "m1"\nkeep', 'source = "sorted"\nkeep')
    assert "units[0].source (S1) is on clock 'sorted'" in message
    assert "nothing joins them" in message


def test_a_session_without_any_data_is_refused(bare):
    (bare / "session.toml").write_text(
        'session = "x"\n[[area]]\nname = "S1"\n[events]\nfile = "events.csv"\n'
        "[trials]\nwindow_ms = [-1, 2]\nbaseline_ms = [-1, 0]\n"
    )
    with pytest.raises(SessionFileError, match="needed is a recording or units"):
        read_session_file(bare / "session.toml")


def test_toml_error_names_line_and_column(bare):
    (bare / "session.toml").write_text('session = "a"\narea = [1, \n')
    with pytest.raises(SessionFileError, match=r"session\.toml: is not valid TOML"):
        read_session_file(bare / "session.toml")
    (bare / "session.toml").write_text('session = "a"\nsubject = \n')
    with pytest.raises(SessionFileError, match=r"line 2, column 11"):
        read_session_file(bare / "session.toml")


def test_missing_or_unreadable_file_is_named(tmp_path):
    with pytest.raises(SessionFileError, match=r"none\.toml: there is no such session file"):
        read_session_file(tmp_path / "none.toml")
    (tmp_path / "latin.toml").write_bytes(b'session = "\xe9"\n')
    with pytest.raises(SessionFileError, match="UTF-8"):
        read_session_file(tmp_path / "latin.toml")
    with pytest.raises(SessionFileError, match="cannot be read"):
        read_session_file(tmp_path / "latin.toml" / "session.toml")  # no folder


@pytest.mark.parametrize(
    ("name", "key"),
    [
        ("s1/run_g0_t0.imec0.lf.bin", "source[0].path (s1_lfp)"),
        ("m1.nwb", "source[1].path (m1)"),
        ("events.csv", "events.file"),
    ],
)
def test_missing_files_are_named(bare, name, key):
    (bare / name).unlink()
    with pytest.raises(SessionFileError, match=re.escape(key)) as caught:
        read_session_file(bare / "session.toml")
    assert "there is no such file" in str(caught.value)
    assert name in str(caught.value)


@pytest.mark.parametrize("path", ["../elsewhere.nwb", "/etc/hostname", "s1/../../x"])
def test_paths_out_of_the_root_are_refused(bare, session_text, path):
    message = refuse(bare, session_text, 'path = "m1.nwb"', f'path = "{path}"')
    assert "source[1].path (m1)" in message
    assert "outside the session's root" in message


def test_symbolic_links_out_of_the_root_are_refused(bare, tmp_path_factory):
    outside = tmp_path_factory.mktemp("outside") / "events.csv"
    outside.write_text("time_s,condition\n1,a\n")
    (bare / "events.csv").unlink()
    (bare / "events.csv").symlink_to(outside)
    with pytest.raises(SessionFileError, match=r"events\.file .* outside the session's root"):
        read_session_file(bare / "session.toml")


def test_links_in_a_circle_and_odd_names_are_refused(bare, session_text):
    (bare / "loop").symlink_to(bare / "loop")
    for path in ("loop", "a\\u0000b"):
        message = refuse(bare, session_text, 'path = "m1.nwb"', f'path = "{path}"')
        assert "source[1].path (m1)" in message


def test_root_may_be_another_folder_and_must_exist(bare, session_text):
    inner = bare / "notes"
    inner.mkdir()
    (inner / "session.toml").write_text('root = ".."\n' + session_text)
    assert read_session_file(inner / "session.toml").root == bare.resolve()
    (inner / "session.toml").write_text('root = "nowhere"\n' + session_text)
    with pytest.raises(SessionFileError, match="root is 'nowhere'; there is no folder"):
        read_session_file(inner / "session.toml")


TABLES = {
    "trials": {"window_ms": [-200, 300], "baseline_ms": [-100, 0]},
    "session": "whisk-02",
    "source": [{"name": "m1", "format": "nwb", "path": "m1.nwb"}],
    "window": [{"name": "early", "span_ms": [5, 40], "for": {"M1": {"extremum": "peak"}}}],
    "area": [
        {
            "name": "M1", "source": "m1", "channels": "0-3", "pitch_um": 100,
            "layers": {"L4": [100, 250]},
        }
    ],
    "events": {"file": "events.csv"},
}  # fmt: skip


def test_written_file_reads_back_in_the_order_of_the_design(bare):
    path = write_session_file(
        bare / "written.toml", TABLES, "A session.\nInvented.",
        comments={"area.channels": "from the surface down", "session": "its name"},
    )  # fmt: skip
    text = path.read_text()
    assert text.startswith("# A session.\n# Invented.\n")
    keys = ("session =", "[[source]]", "[[area]]", "[events]", "[trials]", "[[window]]")
    places = [text.index(key) for key in keys]
    assert places == sorted(places)
    assert 'channels = "0-3" # from the surface down' in text
    assert 'session = "whisk-02" # its name' in text
    found = read_session_file(path).choices
    assert found.area[0].layers == {"L4": (100.0, 250.0)}
    assert found.window[0].extremum_in("M1") == "peak"
    assert found.trials.window_ms == (-200.0, 300.0)


def test_a_wrong_session_is_not_written(bare):
    with pytest.raises(SessionFileError, match="pitch_um"):
        write_session_file(
            bare / "w.toml", {**TABLES, "area": [{**TABLES["area"][0], "pitch_um": -1}]}
        )
    with pytest.raises(SessionFileError, match="does not have yet"):
        write_session_file(bare / "w.toml", {**TABLES, "area": TABLES["area"] * 2})
    assert not (bare / "w.toml").exists()


def test_writing_fails_with_a_clear_error_and_leaves_nothing(bare):
    (bare / "file").write_text("x")
    with pytest.raises(OutputError, match="cannot be written"):
        write_session_file(bare / "file" / "w.toml", TABLES)
