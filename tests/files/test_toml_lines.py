"""Every key of a TOML text is found at its line, whatever else the text holds."""

import tomllib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from biasband.files.toml_lines import key_lines, line_of

ODD_LAYOUT = '''\
# comment with [a.header] and key = 1
title = "a # b"   # not = here
[supply]   # a header
"voltage" = "9 V"
'quo.ted' = 1
text = """
[not.a.table]
not_a_key = 1 \\"""
"""
literal = \'\'\'
also = "not"
\'\'\'
points = [
  [1, 2],   # ] a comment
  [3, 4],
]
[[require]]
id = "a"
[require.inner]
deep.dotted . key = 1
[[ require ]]
id = "b"
[ resistors . RC ]
value = { is = "here" }
last = 1'''


def test_each_key_of_an_odd_layout_is_at_its_line():
    assert tomllib.loads(ODD_LAYOUT)  # the text is what the parser reads, too
    lines = key_lines(ODD_LAYOUT)
    # Counted by hand in the text above.
    assert lines == {
        ("title",): 2,
        ("supply",): 3,
        ("supply", "voltage"): 4,
        ("supply", "quo.ted"): 5,
        ("supply", "text"): 6,
        ("supply", "literal"): 10,
        ("supply", "points"): 13,
        ("require",): 17,
        ("require", 0): 17,
        ("require", 0, "id"): 18,
        ("require", 0, "inner"): 19,
        ("require", 0, "inner", "deep"): 20,
        ("require", 0, "inner", "deep", "dotted"): 20,
        ("require", 0, "inner", "deep", "dotted", "key"): 20,
        ("require", 1): 21,
        ("require", 1, "id"): 22,
        ("resistors",): 23,
        ("resistors", "RC"): 23,
        ("resistors", "RC", "value"): 24,
        ("resistors", "RC", "last"): 25,
    }


@pytest.mark.parametrize(
    ("path", "line"),
    [
        (("resistors", "RC", "value", "is"), 24),
        (("resistors", "RC", "missing"), 23),
        (("require", 1, "at_least"), 21),
        (("missing", "key"), None),
    ],
)
def test_missing_key_is_at_the_line_of_what_would_hold_it(path, line):
    assert line_of(key_lines(ODD_LAYOUT), path) == line


VALUES = st.sampled_from(
    [
        "1",
        '"a = b # [c]"',
        "'[x]'",
        '"""\nk = 1\n"""',
        "'''\n[t]\n'''",
        "[\n1, # ]\n[2]]",
        "{ a = [1] }",
        '"\\""',
    ]
)


@given(st.lists(st.tuples(st.booleans(), VALUES), min_size=1, max_size=12))
def test_line_of_each_key_is_where_it_was_written(entries):
    text, expected = "", {}
    table = ()
    for number, (opens_table, value) in enumerate(entries):
        if opens_table:
            table = (f"t{number}",)
            expected[table] = text.count("\n") + 1
            text += f"[t{number}] # here\n"
        expected[(*table, f"k{number}")] = text.count("\n") + 1
        text += f"k{number} = {value} # there\n"
    assert key_lines(text) == expected
