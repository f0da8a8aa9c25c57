"""Every key of a TOML text is found where it stands."""

from __future__ import annotations

import tomllib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from resonate.scene.locate import Locator, Spot, written

TEXT = '''\
title = "Sail store" # a # b
a.b."c d" = [1, # ] not the end
  2, {k = "v]", z.q = [3,
 4]}]

[[body]]
name = """three
lines, "quoted"
"""
  material = 'oak'
[body.modes]
heard = 20_000
[[body.support]]
where = "x-"
[[body.support]]
  where = "x+"
[[body]]
name = "\\u0074ub"
when = 1979-05-27 07:32:00
[body.show]
[deep."odd.key".table]
n = 1
'''

PLACES = [
    (("title",), 1, 1),
    (("a", "b", "c d"), 2, 1),
    (("a", "b", "c d", 0), 2, 14),
    (("a", "b", "c d", 1), 3, 3),
    (("a", "b", "c d", 2), 3, 6),
    (("a", "b", "c d", 2, "k"), 3, 7),
    (("a", "b", "c d", 2, "z", "q", 1), 4, 2),
    (("body", 0), 6, 1),
    (("body", 0, "name"), 7, 1),
    (("body", 0, "material"), 10, 3),
    (("body", 0, "modes", "heard"), 12, 1),
    (("body", 0, "support", 0, "where"), 14, 1),
    (("body", 0, "support", 1), 15, 1),
    (("body", 0, "support", 1, "where"), 16, 3),
    (("body", 1), 17, 1),
    (("body", 1, "when"), 19, 1),
    (("body", 1, "show"), 20, 1),
    (("deep", "odd.key", "table", "n"), 22, 1),
    # What is not written stands where its table begins.
    (("body", 1, "material"), 17, 1),
    (("body", 0, "support", 1, "hold"), 15, 1),
    (("nowhere",), 1, 1),
]


@pytest.mark.parametrize("ends", ["\n", "\r\n"])
@pytest.mark.parametrize(("path", "line", "column"), PLACES)
def test_keys_are_found(path, line, column, ends):
    text = TEXT.replace("\n", ends)
    tomllib.loads(text)  # the scanner relies on it
    assert Locator(text).find(path) == Spot(line=line, column=column)


def paths_of(value, path=()):
    """Every key path of a parsed document."""
    items = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    for key, item in items:
        yield (*path, key)
        yield from paths_of(item, (*path, key))


def test_every_path_of_the_parsed_document_is_known():
    locator = Locator(TEXT)
    assert all(locator.knows(path) for path in paths_of(tomllib.loads(TEXT)))


TRICKY = [
    's = """a"""""\nx = 1',  # two quotes before the closing three
    "s = '''it''s'''\nx = 1",
    's = """\\"""\n x = 0 # """\nx = 1'.replace("\n x", " x"),
    "k = {}\n[x]\n",
    "l = []\nx = [[],[[]],{}]",
    "x = +1e5 # c\n\n\n#end",
    "'quoted key' = true\nx = false",
    '"" = 1\nx = 2',
    "x = 07:32:00.999",
    'x = [\n#c\n"a", # d\n\n"b",\n]',
    "1.2 = 3\nx = 1",
]


@pytest.mark.parametrize("text", TRICKY)
def test_tricky_texts(text):
    locator = Locator(text)
    assert all(locator.knows(path) for path in paths_of(tomllib.loads(text)))


@given(st.text(alphabet="ab.=[]{}\"'#, \n1\\", max_size=40))
def test_whatever_the_standard_reader_accepts_can_be_located(text):
    try:
        document = tomllib.loads(text)
    except tomllib.TOMLDecodeError:
        return
    locator = Locator(text)
    assert all(locator.knows(path) for path in paths_of(document))


@pytest.mark.parametrize(
    ("path", "text"),
    [
        (("body", 0, "material"), "body[0].material"),
        (("a", "c d", 2, 1), 'a."c d"[2][1]'),
        ((), ""),
    ],
)
def test_paths_are_written_as_people_read_them(path, text):
    assert written(path) == text
