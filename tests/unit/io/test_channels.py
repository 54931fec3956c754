"""The `channels` key of an area."""

import pytest

from lfptools.errors import InputError
from lfptools.io.channels import parse_channels


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("0-15", list(range(16))),
        ("15-0", list(range(15, -1, -1))),
        ("0-7,9-15", [*range(8), *range(9, 16)]),
        ("3", [3]),
        (" 2 , 5-4", [2, 5, 4]),
        ([4, 2, 0], [4, 2, 0]),
    ],
)
def test_forms(text, expected):
    assert parse_channels(text) == expected


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "holds ''"),
        ([], "no channel"),
        ("a-b", "holds 'a-b'"),
        ("1-", "holds '1-'"),
        ("-1", "holds '-1'"),
        ("1--3", "holds '1--3'"),
        ("0-99999999", "holds '0-99999999'"),
        ("1,1", "channel 1 twice"),
        ([0, -2], "channel -2"),
    ],
)
def test_refused(text, words):
    with pytest.raises(InputError) as caught:
        parse_channels(text)
    assert words in str(caught.value)
