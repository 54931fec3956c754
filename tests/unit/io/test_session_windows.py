"""Windows written into the text of a session file: what changes, and that nothing else does.

The file is read back by the standard library's TOML reader, which shares no code with the writer.
"""

import difflib
import tomllib

import msgspec
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from lfptools.choices import WindowChoice, WindowFor
from lfptools.io.session_blocks import split_blocks
from lfptools.io.session_file import parse_session_file, read_session_file
from lfptools.io.session_update import file_digest, update_session_file
from lfptools.io.session_windows import with_windows

replace = msgspec.structs.replace


@pytest.fixture
def path(commented):
    return commented


def windows_of(path):
    return read_session_file(path).choices.window


def update(path, windows, **more):
    return update_session_file(path, windows, seen=file_digest(path), **more)


def changed_lines(before, after):
    """Lines taken away and lines added, in order."""
    delta = difflib.ndiff(before.splitlines(), after.splitlines())
    found = [line for line in delta if line[0] in "+-"]
    return ([each[2:] for each in found if each[0] == sign] for sign in "-+")


def test_the_same_windows_leave_every_byte(path):
    before = path.read_bytes()
    digest = file_digest(path)
    assert update(path, windows_of(path)) == digest
    assert path.read_bytes() == before


def test_a_moved_window_changes_its_lines_alone(path):
    before = path.read_text()
    early, late = windows_of(path)
    moved = replace(early, span_ms=(5.6, 41.0), chosen="on these trials")
    digest = update(path, [moved, late])
    assert windows_of(path) == [moved, late]
    assert digest == file_digest(path)
    gone, new = changed_lines(before, path.read_text())
    assert gone == ["span_ms = [5, 40]# from the pilot"]
    assert new == ["span_ms = [5.6, 41]# from the pilot", 'chosen = "on these trials"']


def test_a_key_is_added_to_its_window_not_behind_the_comments_of_the_next_table(path):
    early, late = windows_of(path)
    update(path, [early, replace(late, direction_ms=(40.0, 160.0))])
    text = path.read_text()
    assert 'areas = ["S1"]\n# end of the windows\ndirection_ms = [40, 160]\n\n# how large' in text


def test_a_renamed_window_keeps_its_comments(path):
    before = path.read_text()
    early, late = windows_of(path)
    update(path, [replace(early, name="first"), late], was={"first": "early", "late": "late"})
    gone, new = changed_lines(before, path.read_text())
    assert gone == ['name = "early"  # feedforward  ']
    assert new == ['name = "first"  # feedforward  ']


def test_names_may_change_hands(path):
    early, late = windows_of(path)
    swapped = [replace(early, name="late"), replace(late, name="early")]
    update(path, swapped, was={"late": "early", "early": "late"})
    assert windows_of(path) == swapped
    assert "span_ms = [5, 40]# from the pilot" in path.read_text()


def test_a_removed_window_takes_its_own_lines_along(path):
    before = path.read_text()
    _, late = windows_of(path)
    update(path, [late])
    gone, new = changed_lines(before, path.read_text())
    assert new == []
    assert [line.lstrip() for line in gone if line] == [
        "[[window]]   # the first wave", 'name = "early"  # feedforward  ',
        "span_ms = [5, 40]# from the pilot", "direction_ms = [ 0 , 100 ]",
        '# extremum = "peak"', "[window.for.M1]", "span_ms = [10, 50]   # by eye",
    ]  # fmt: skip
    assert windows_of(path) == [late]
    update(path, [])
    assert "# how large is too large\n[clean]" in path.read_text()
    assert windows_of(path) == []


@pytest.mark.parametrize("at", [0, 1, 2])
def test_a_new_window_stands_where_it_belongs(path, at):
    before = path.read_text()
    windows = windows_of(path)
    new = WindowChoice(
        name="ripple", span_ms=(60.0, 90.5), extremum="peak", areas=["S1", "M1"],
        for_={"M1": WindowFor(span_ms=(70.0, 95.0))}, direction_ms=(0.0, 120.0),
        chosen="on these trials",
    )  # fmt: skip
    windows.insert(at, new)
    update(path, windows)
    assert windows_of(path) == windows
    gone, _ = changed_lines(before, path.read_text())
    assert gone == []


def test_windows_may_change_their_order(path):
    early, late = windows_of(path)
    update(path, [late, early])
    assert windows_of(path) == [late, early]


def test_another_own_span_of_an_area_is_written(path):
    early, late = windows_of(path)
    own = replace(early, for_={"S1": WindowFor(extremum="peak")})
    update(path, [own, late])
    assert windows_of(path) == [own, late]


def test_windows_are_added_where_the_file_has_none(path, commented_windows):
    text = path.read_text().replace(commented_windows, "# to be chosen")
    path.write_text(text)  # no line end behind the last line
    new = [WindowChoice(name="wave 1", span_ms=(5.0, 40.0), chosen="on these trials")]
    update(path, new)
    assert windows_of(path) == new
    assert path.read_text().startswith(text + "\n\n[[window]]\n")


INLINE = """\
window = [
  {name = "early", span_ms = [5, 40]}, # first
  {name="late", span_ms=[50,150]}
]
"""


def test_windows_in_one_list(path, commented_windows):
    rest = path.read_text().replace(commented_windows, "")
    path.write_text(INLINE + rest)
    early, late = windows_of(path)
    changed = [
        replace(early, span_ms=(5.6, 40.0)),
        WindowChoice(name="between", span_ms=(41.0, 49.0)),
        late,
    ]
    update(path, changed)
    assert windows_of(path) == changed
    assert path.read_text().endswith(rest)
    update(path, [changed[1]])
    assert windows_of(path) == [changed[1]]


def test_an_empty_list_is_filled(path, commented_windows):
    path.write_text("window = []\n" + path.read_text().replace(commented_windows, ""))
    new = [WindowChoice(name="wave", span_ms=(5.0, 40.0), for_={"M1": WindowFor(extremum="peak")})]
    update(path, new)
    assert windows_of(path) == new


@pytest.mark.parametrize(
    ("direction", "line"),
    [
        ("", '\n[direction]\nsignal = "lfp"\n'),
        ("\n[direction] # how\norder = 5 # few\n", 'order = 5 # few\nsignal = "lfp"\n'),
        ('\n[direction]\nsignal = "csd" # sinks\n', '\nsignal = "lfp" # sinks\n'),
        ("\n[direction.bands_hz]\nbeta = [13, 30]\n", '\n[direction]\nsignal = "lfp"\n'),
    ],
)
def test_the_signal_is_written(path, direction, line):
    path.write_text(path.read_text() + direction)
    before = read_session_file(path).choices
    update(path, before.window, direction_signal="lfp")
    after = read_session_file(path).choices
    assert after.direction == replace(before.direction, signal="lfp")
    assert replace(after, direction=before.direction) == before
    assert line in path.read_text()


@pytest.mark.parametrize("direction", ["direction = {order = 5}\n", "direction.order = 5\n"])
def test_the_signal_is_written_above_the_tables(path, direction):
    path.write_text(direction + path.read_text())
    update(path, windows_of(path), direction_signal="lfp")
    found = read_session_file(path).choices.direction
    assert (found.order, found.signal) == (5, "lfp")


def test_the_same_signal_is_not_written(path):
    before = path.read_bytes()
    update(path, windows_of(path), direction_signal="csd")
    assert path.read_bytes() == before


def test_line_ends_of_the_file_are_kept(path):
    path.write_bytes(path.read_bytes().replace(b"\n", b"\r\n"))
    early, late = windows_of(path)
    new = WindowChoice(name="third", span_ms=(160.0, 200.0))
    update(path, [replace(early, chosen="on these trials"), late, new], direction_signal="lfp")
    content = path.read_bytes()
    assert content.count(b"\r\n") == content.count(b"\n") > 50


def test_a_bracket_in_a_text_or_list_is_no_table(path):
    odd = 'subject = """\n[[window]]\nname = "no window"\n"""\n'
    path.write_text(path.read_text().replace('subject = "rat 1"\n', odd))
    before = path.read_text()
    early, late = windows_of(path)
    update(path, [replace(early, span_ms=(6.0, 40.0)), late])
    gone, _ = changed_lines(before, path.read_text())
    assert gone == ["span_ms = [5, 40]# from the pilot"]


def test_a_window_table_may_stand_apart_from_its_area(path):
    """TOML allows another table between [[window]] and [window.for.M1]."""
    text = path.read_text()
    own = text[text.index("  [window.for.M1]") : text.index("\n# the second wave")]
    text = text.replace(own, "[rates]\nbin_ms = 2\n" + own)
    path.write_text(text)
    early, late = windows_of(path)
    assert early.span_s("M1") == (0.010, 0.050)
    update(path, [late])
    assert windows_of(path) == [late]
    assert "[rates]\nbin_ms = 2\n" in path.read_text()


NAMES = [
    '<b>"early"</b>',
    "it's",
    "a\\b",
    "\U0001f400 müde",
    "[[window]]",
    "# no comment",
    "a\u2028b",
]


@pytest.mark.parametrize("name", NAMES)
def test_any_name_can_be_written(path, name):
    early, late = windows_of(path)
    new = [replace(early, name=name), late, WindowChoice(name=name + "2", span_ms=(1.0, 9.0))]
    update(path, new, was={name: "early"})
    assert windows_of(path) == new
    assert tomllib.loads(path.read_text("utf-8"))["window"][0]["name"] == name


spans = st.tuples(st.integers(-100, 100), st.integers(1, 100)).map(
    lambda found: (found[0] * 0.8, (found[0] + found[1]) * 0.8)
)
names = st.text(st.characters(exclude_categories=["Cs", "Cc"]), min_size=1, max_size=12)
new_windows = st.builds(
    WindowChoice,
    name=names,
    span_ms=spans,
    extremum=st.sampled_from(["trough", "peak"]),
    chosen=st.sampled_from(["before", "on these trials"]),
)


@settings(
    max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(
    added=st.lists(new_windows, max_size=4, unique_by=lambda window: window.name),
    kept=st.sets(st.sampled_from(["early", "late"])),
    place=st.randoms(use_true_random=False),
)
def test_whatever_is_written_is_read_back(path, added, kept, place):
    """Any mixture of kept and new windows comes back, and no line of another table is lost."""
    content = path.read_bytes()
    windows = [each for each in windows_of(path) if each.name in kept]
    for each in added:
        if each.name not in kept:
            windows.insert(place.randint(0, len(windows)), each)
    new = with_windows(content, path, windows, direction_signal="lfp")
    assert parse_session_file(new, path).choices.window == windows
    before, after = (tomllib.loads(each.decode()) for each in (content, new))
    for each in (before, after):
        each.pop("window", None)
    assert after.pop("direction") == {"signal": "lfp"}
    assert after == before
    others = [line for line in content.decode().split("\n") if line.lstrip().startswith("#")]
    lost = [line for line in others if line not in new.decode().split("\n")]
    assert set(lost) <= {'# extremum = "peak"', "# end of the windows"}


def test_blocks_give_back_every_byte(path):
    text = path.read_text()
    for each in (text, text.replace("\n", "\r\n"), "", "# nothing\n", text.rstrip("\n")):
        blocks = split_blocks(each)
        assert "".join(block.body + block.rest for block in blocks) == each
    windows = [block for block in split_blocks(text) if block.keys[:1] == ("window",)]
    assert [(block.keys, block.many) for block in windows] == [
        (("window",), True), (("window", "for", "M1"), False), (("window",), True),
    ]  # fmt: skip
