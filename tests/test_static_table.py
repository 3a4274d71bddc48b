"""The table [static]: what is read from it, and every error with its place. Outside reference: TOML itself."""

import tomllib

import pytest

from transim.design.toml import read_design, starting_design
from transim.errors import InvalidDesign
from transim.parts.catalogue import load_catalogue

CATALOGUE = load_catalogue()
START = starting_design("series_pair", "resistor_feed", CATALOGUE)


def read(tmp_path, table):
    file = tmp_path / "heron.toml"
    file.write_text(START + "\n" + table, encoding="utf-8")
    return read_design(file, catalogue=CATALOGUE)


def test_without_the_table_there_is_none(tmp_path):
    assert read(tmp_path, "").static is None


def test_every_key_is_read(tmp_path):
    table = '[static]\nfrom = "1 MHz"\nto = "2 GHz"\npoints = 7\nbias_sweep = ["10 uA", "1 mA"]\n'
    found = read(tmp_path, table).static
    assert (found.start, found.stop, found.points, found.bias_sweep) == (1e6, 2e9, 7, (1e-5, 1e-3))


def test_defaults(tmp_path):
    found = read(tmp_path, '[static]\nfrom = "1 MHz"\nto = "2 GHz"\n').static
    assert (found.points, found.bias_sweep) == (20, ())


def test_the_starting_design_shows_it_as_comments(tmp_path):
    head, marker, table = START.partition("# [static]")
    assert marker
    lines = [line.removeprefix("# ") for line in (marker + table).splitlines()]
    assert set(tomllib.loads("\n".join(lines))["static"]) == {"from", "to", "points", "bias_sweep"}
    file = tmp_path / "heron.toml"
    file.write_text(head + "\n".join(lines), encoding="utf-8")
    assert read_design(file, catalogue=CATALOGUE).static.stop == 1e9


@pytest.mark.parametrize(
    ("table", "key", "message"),
    [
        ('from = "1 MHz"', "static.to", "missing"),
        ('to = "1 MHz"', "static.from", "missing"),
        ('from = "1 MHz"\nto = "1 MHz"', "static.to", "above its lowest frequency"),
        ('from = "1 MHz"\nto = "1.1 MHz"', "static.points", "narrower than one step"),
        ('from = "1 MHz"\nto = "3 MHz"\npoints = 1', "static.points", "narrower than one step"),
        ('from = "1 MHz"\nto = "3 GHz"\npoints = 0', "static.points", "out of range"),
        ('from = "1 MHz"\nto = "3 GHz"\nstart = "2 MHz"', "static.start", "unknown key"),
        ('from = "1 MHz"\nto = "3 s"', "static.to", "frequency"),
        ('from = "1 MHz"\nto = "3 GHz"\nbias_sweep = ["1 mA", "1 mA"]', "static.bias_sweep[1]", "twice"),
        ('from = "1 MHz"\nto = "3 GHz"\nbias_sweep = []', "static.bias_sweep", "at least one"),
    ],
)
def test_errors_have_their_key_and_line(tmp_path, table, key, message):
    with pytest.raises(InvalidDesign) as caught:
        read(tmp_path, "[static]\n" + table)
    (error,) = caught.value.errors
    assert error.key == key
    assert message in str(error)
    assert error.line > START.count("\n")


def test_the_points_that_a_narrow_range_needs_are_enough(tmp_path):
    with pytest.raises(InvalidDesign, match="at least 25 points a decade"):
        read(tmp_path, '[static]\nfrom = "1 MHz"\nto = "1.1 MHz"\n')
    assert read(tmp_path, '[static]\nfrom = "1 MHz"\nto = "1.1 MHz"\npoints = 25\n').static.points == 25


def test_the_table_must_be_a_table(tmp_path):
    file = tmp_path / "heron.toml"
    file.write_text("static = 3\n" + START, encoding="utf-8")
    with pytest.raises(InvalidDesign, match="a table is wanted here"):
        read_design(file, catalogue=CATALOGUE)
