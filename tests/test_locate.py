"""The locator against a text counted by hand, and against the standard library's reader on drawn texts."""

import itertools
import tomllib

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from transim.design.locate import Locations, Place, dotted, split_dotted

HAND_COUNTED = '''\
title = "Ä # no comment" # a comment, [not.a.table]
a.b . "c d" = 1
  indented = 2

[ driver . "fast one" ]   # table
value = """
[not.a.table]
not_a_key = 1 \\""" still inside""""
after = \'\'\'
it''s = 'raw' \\\'\'\'
'lit.eral' = 3
list = [ 1, "]", # comment ]
   [ 2, 3 ],
   { x = 4, y.z = [ 5 ] },
]
when = 1979-05-27 07:32:00

[[arm]]
name = "n"
[[arm]]
[arm.diode]
width = 1
[[arm.diode.cell]]
n = 1
[[arm.diode.cell]]
n = 2
'''

PLACES = {
    "title": (1, 1),
    "a": (2, 1),
    "a.b": (2, 3),
    'a.b."c d"': (2, 7),
    "indented": (3, 3),
    "driver": (5, 3),
    'driver."fast one"': (5, 12),
    'driver."fast one".value': (6, 1),
    'driver."fast one".after': (9, 1),
    'driver."fast one"."lit.eral"': (11, 1),
    'driver."fast one".list': (12, 1),
    'driver."fast one".list[0]': (12, 10),
    'driver."fast one".list[1]': (12, 13),
    'driver."fast one".list[2]': (13, 4),
    'driver."fast one".list[2][1]': (13, 9),
    'driver."fast one".list[3]': (14, 4),
    'driver."fast one".list[3].x': (14, 6),
    'driver."fast one".list[3].y': (14, 13),
    'driver."fast one".list[3].y.z': (14, 15),
    'driver."fast one".list[3].y.z[0]': (14, 21),
    'driver."fast one".when': (16, 1),
    "arm": (18, 3),
    "arm[0]": (18, 3),
    "arm[0].name": (19, 1),
    "arm[1]": (20, 3),
    "arm[1].diode": (21, 6),
    "arm[1].diode.width": (22, 1),
    "arm[1].diode.cell[0].n": (24, 1),
    "arm[1].diode.cell[1].n": (26, 1),
}


def all_paths(value, path=()):
    """Go through every key path of a document that the standard library has read."""
    if path:
        yield path
    if isinstance(value, dict):
        for key, inner in value.items():
            yield from all_paths(inner, (*path, key))
    elif isinstance(value, list):
        for index, inner in enumerate(value):
            yield from all_paths(inner, (*path, index))


@pytest.mark.parametrize("key", PLACES)
def test_place_counted_by_hand(key):
    assert Locations(HAND_COUNTED).exactly(key) == Place(*PLACES[key])


def test_every_key_of_the_hand_counted_text_has_a_place():
    locations = Locations(HAND_COUNTED)
    assert [path for path in all_paths(tomllib.loads(HAND_COUNTED)) if locations.exactly(path) is None] == []


def test_windows_line_ends_do_not_move_places():
    dos = Locations(HAND_COUNTED.replace("\n", "\r\n"))
    assert {key: dos.exactly(key) for key in PLACES} == {key: Place(*place) for key, place in PLACES.items()}


def test_missing_key_is_found_at_its_innermost_table():
    locations = Locations(HAND_COUNTED)
    assert locations.find('driver."fast one".missing.deeper') == Place(5, 12)
    assert locations.exactly('driver."fast one".missing') is None
    assert locations.find("nothing") is None


@pytest.mark.parametrize(
    "text", ["a = 1\nb = [1, \nc = ]", "a = 1\nb 2", 'a = 1\nb = "open', "a = 1\n[x\ny = 3"]
)
def test_invalid_text_gives_what_stands_before_the_fault(text):
    assert Locations(text).exactly("a") == Place(1, 1)


def test_deep_nesting_ends():
    assert Locations("a = " + "[" * 100_000).exactly("a") == Place(1, 1)


keys = st.one_of(st.sampled_from(["a", "b-1", "_x", "9"]), st.text(min_size=1, max_size=4))
ODD_TEXTS = ['"#]}"', "'[x]'", '"""\n]\n# a\n"""', "'''\n[t]\n'''", '"\\""', "1.5", "true", "07:32:00"]


@given(st.lists(st.one_of(keys, st.integers(0, 12)), min_size=1, max_size=5))
def test_dotted_key_reads_back(path):
    assert split_dotted(dotted(path)) == tuple(path)


class Writer:
    """Writes a drawn TOML text in which every number is different."""

    def __init__(self, draw):
        self.draw = draw
        self.counter = itertools.count(1000)

    def key(self, key):
        literal = self.draw(st.booleans()) and "'" not in key and key.isprintable()
        return f"'{key}'" if literal else dotted((key,))

    def blank(self):
        return self.draw(st.sampled_from(["", " ", "\n", " # ] } [x]\n", "\n\t"]))

    def array(self, depth):
        items = [
            self.blank() + self.value(depth - 1) + self.blank() for _ in range(self.draw(st.integers(0, 3)))
        ]
        return "[" + ",".join(items) + self.blank() + "]"

    def inline_table(self, depth):
        names = self.draw(st.lists(keys, max_size=3, unique=True))
        return "{ " + ", ".join(f"{self.key(name)} = {self.value(depth - 1)}" for name in names) + " }"

    def value(self, depth):
        kind = self.draw(st.integers(0, 5 if depth else 3))
        if kind == 5:
            return self.inline_table(depth)
        if kind == 4:
            return self.array(depth)
        return self.draw(st.sampled_from(ODD_TEXTS)) if kind == 3 else str(next(self.counter))

    def body(self, indent):
        lines = []
        for name in self.draw(st.lists(keys, max_size=4, unique=True)):
            left = self.key(name)
            if self.draw(st.booleans()):
                left += self.draw(st.sampled_from([".", " . "])) + self.key(self.draw(keys))
            lines.append(f"{indent}{left}{self.draw(st.sampled_from(['=', ' = ']))}{self.value(2)}")
            lines.append(self.draw(st.sampled_from(["", "# comment = 1", "\t"])))
        return lines


@st.composite
def documents(draw):
    """Draw a TOML text with tables, arrays of tables and tables inside these."""
    writer = Writer(draw)
    lines = writer.body("")
    for number in range(draw(st.integers(0, 4))):
        name = f"table{number}.{writer.key(draw(keys))}"
        if draw(st.booleans()):
            lines += [f"[ {name} ]", *writer.body("  ")]
            continue
        for _ in range(draw(st.integers(1, 3))):
            lines += [f"[[{name}]]", *writer.body(""), f"[{name}.inner-of-array]", *writer.body("")]
    return "\n".join(lines)


@settings(max_examples=50)
@given(documents())
def test_place_of_every_value_is_where_the_text_has_it(text):
    document = tomllib.loads(text)
    lines = text.split("\n")
    locations = Locations(text)
    for path in all_paths(document):
        place = locations.exactly(path)
        assert place is not None, path
        rest = "\n".join([lines[place.line - 1][place.column - 1 :], *lines[place.line :]])
        inner = document
        for piece in path:
            inner = inner[piece]
        if isinstance(path[-1], str):
            name = next(iter(tomllib.loads(f"{key_at(rest)} = 0")))
            assert name == path[-1]
        elif isinstance(inner, int) and not isinstance(inner, bool):
            assert rest.startswith(str(inner))
        if isinstance(path[-1], str) and type(inner) is int:
            # All numbers differ, so the number after the key tells that it is this very key.
            assert rest[len(key_at(rest)) :].lstrip(" =").startswith(str(inner))


def key_at(text):
    """Return the key at the start of a text, as it is written there."""
    for end in range(1, len(text) + 1):
        if end < len(text) and text[end] not in " =.]\t":
            continue
        try:
            if len(tomllib.loads(f"{text[:end]} = 0")) == 1:
                return text[:end]
        except tomllib.TOMLDecodeError:
            continue
    raise AssertionError(text[:40])
