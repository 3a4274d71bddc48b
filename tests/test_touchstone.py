"""Touchstone files, read back by an independent reader.

Outside references: scikit-rf, which reads both versions of the format; and the keywords of the IBIS Open Forum's
"Touchstone File Format Specification", version 2.0, 2009 (memory).
"""

import numpy as np
import pytest
import skrf

from transim.report.touchstone import touchstone_text


def matrices(count, ports, seed=1):
    """Return frequencies and S-matrices that are neither reciprocal nor symmetric."""
    random = np.random.default_rng(seed)
    s = random.normal(size=(count, ports, ports)) + 1j * random.normal(size=(count, ports, ports))
    return np.geomspace(1e6, 1e10, count), s


@pytest.mark.parametrize(("ports", "impedance"), [(1, 75.0), (2, 50.0), (3, 50.0), (4, 93.5), (5, 50.0), (9, 50.0)])
def test_scikit_rf_reads_the_same_numbers(tmp_path, ports, impedance):
    frequency, s = matrices(7, ports)
    file = tmp_path / f"some.s{ports}p"
    file.write_text(touchstone_text(frequency, s, [impedance] * ports, ["Heron at 25 \N{DEGREE SIGN}C"]))
    found = skrf.Network(str(file))
    assert found.nports == ports
    assert np.array_equal(found.f, frequency)
    assert np.array_equal(found.s, s)
    assert np.array_equal(found.z0, np.full((7, ports), impedance + 0j))


def test_each_port_keeps_its_own_reference(tmp_path):
    frequency, s = matrices(2, 2)
    file = tmp_path / "some.s2p"
    file.write_text(touchstone_text(frequency, s, [50.0, 12.5]))
    assert skrf.Network(str(file)).z0 == pytest.approx(np.array([[50.0, 12.5]] * 2))


def test_the_keywords_of_the_standard_stand_in_its_order():
    frequency, s = matrices(3, 2)
    lines = touchstone_text(frequency, s, [50.0, 50.0], ["Heron", "\N{MICRO SIGN}"]).splitlines()
    assert all(line.isascii() for line in lines)
    assert [line for line in lines if line[0] in "![#"] == [
        "! Heron",
        "! ?",
        "[Version] 2.0",
        "# Hz S RI R 50.0",
        "[Number of Ports] 2",
        "[Two-Port Data Order] 12_21",
        "[Number of Frequencies] 3",
        "[Reference] 50.0 50.0",
        "[Matrix Format] Full",
        "[Network Data]",
        "[End]",
    ]


def test_rows_of_more_than_two_ports_start_on_lines_of_their_own():
    frequency, s = matrices(1, 5)
    text = touchstone_text(frequency, s, [50.0] * 5)
    data = text.split("[Network Data]\n")[1].splitlines()[:-1]
    # five pairs a row: four and one; the first line begins with the frequency
    assert [len(line.split()) for line in data] == [9, 2] + [8, 2] * 4
    assert [float(line.split()[0]) for line in data[2::2]] == [row[0].real for row in s[0][1:]]


def test_numbers_of_ports_that_do_not_fit_are_refused():
    frequency, s = matrices(3, 2)
    with pytest.raises(ValueError, match="does not fit 3 frequencies and 3 ports"):
        touchstone_text(frequency, s, [50.0] * 3)
