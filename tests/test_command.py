"""A recorded command: its corners, levels, edges and pulses, and every error with its key.

Outside references: instants of straight lines, by hand; edges from 10 to 90 % over 0.8, as IEEE Std 181 has them.
"""

import math

import numpy as np
import pytest

from transim.circuit.timeline import timeline_of
from transim.design.command import read_command
from transim.design.parameters import parameters_of
from transim.design.toml import read_design
from transim.errors import DesignError, InvalidDesign

US = 1e-6
POINTS = ((0, 0), (1, 0), (1.01, 3), (2.51, 3), (2.52, 0), (4, 0), (4.02, 3), (7, 3), (7.04, 0), (12, 0))
DESIGN = """\
[control]
record = "command.csv"
{more}
[carrier]
frequency = "100 MHz"
[switch]
path = "series_single"
junction = "thin"
[junction.thin]
part = "pin_lumped"
[driver.ideal]
part = "ideal_current"
"""


def write(folder, points=POINTS, head="time [s], control [V]", separator=", "):
    lines = [head, *(f"{time * 1e-6:.9e}{separator}{volts}" for time, volts in points)]
    (folder / "command.csv").write_text("\n".join(lines) + "\n")
    return folder / "command.csv"


def design(folder, more="", points=POINTS):
    write(folder, points)
    (folder / "design.toml").write_text(DESIGN.format(more=more))
    return read_design(folder / "design.toml")


@pytest.mark.parametrize("separator", [", ", ";", "\t", "  "])
def test_levels_edges_and_pulses(tmp_path, separator):
    command = read_command(write(tmp_path, separator=separator))
    assert (command.low, command.high) == (0.0, 3.0)
    assert command.pulses == (
        (pytest.approx(1.005 * US), pytest.approx(2.515 * US)),
        (pytest.approx(4.01 * US), pytest.approx(7.02 * US)),
    )
    # the longer edge of the judged pulse, the falling one
    assert command.edge == pytest.approx(0.04 * US)
    assert command.spacing == pytest.approx(3.005 * US)
    assert command.next_rise is None


def test_the_last_complete_pulse_is_judged_up_to_the_next_rise(tmp_path):
    found = design(tmp_path, 'period = "9 us"', (*POINTS, (12.04, 3), (13, 3)))
    control, timeline = found.control, timeline_of(found)
    assert (control.pulses, control.period) == (2, 9 * US)
    assert control.on_for == pytest.approx(3.01 * US)
    assert timeline.rising == pytest.approx(4.01 * US)
    assert timeline.falling == pytest.approx(7.02 * US)
    # the next rise at 12.02 us comes before the period ends
    assert timeline.stop == pytest.approx((12.02 - 0.02) * US)
    first = timeline.first_timing(True)
    assert (first.on_edge, first.off_edge) == (pytest.approx(1.005 * US), pytest.approx(2.515 * US))
    assert first.stop == pytest.approx((4.01 - 0.02) * US)
    assert first.period == pytest.approx(3.005 * US)
    # where RF passes while the command is low, the edges change places
    other = timeline.first_timing(False)
    assert (other.on_edge, other.off_edge) == (first.off_edge, first.on_edge)


def test_record_without_lead_is_moved_so_that_the_circuit_settles_first(tmp_path):
    moved = tuple((time - 0.99, volts) for time, volts in POINTS[1:])
    timeline = timeline_of(design(tmp_path, 'period = "9 us"', moved))
    assert timeline.lead == pytest.approx(3.01 * US / 50 + 0.04 * US)
    assert timeline.command[1][0] == pytest.approx(timeline.lead + 0.005 * US)
    assert timeline.falling - timeline.rising == pytest.approx(3.01 * US)


def test_period_comes_from_the_record_where_it_holds_several_pulses(tmp_path):
    pulses = (*POINTS[:5], (4, 0), (4.02, 3), (5, 3), (5.02, 0), (8, 0))
    assert design(tmp_path, points=pulses).control.period == pytest.approx(3.005 * US)


def test_samples_on_straight_lines_are_left_out(tmp_path):
    time = np.linspace(0, 12, 24001)
    volts = np.interp(time, *zip(*POINTS, strict=True)) + 1e-3 * np.sin(40 * math.pi * time)
    command = read_command(write(tmp_path, tuple(zip(time, volts, strict=True))))
    # of 24001 samples, the ten corners and a few that the ripple adds
    assert len(POINTS) <= len(command.time) <= 2 * len(POINTS)
    assert command.pulses[-1][0] == pytest.approx(4.01 * US, abs=1e-9)


def test_control_of_a_recorded_command_is_not_varied(tmp_path):
    names = parameters_of(design(tmp_path, 'period = "9 us"'))
    assert not any(name.startswith("control.") for name in names)
    assert "driver.ideal.on_current" in names


@pytest.mark.parametrize(
    ("points", "head", "said"),
    [
        (POINTS[:4], "", "no complete pulse"),
        (((0, 3), *POINTS[2:]), "", "begin while it is low"),
        (((0, 1), (1, 1), (2, 1)), "", "never changes"),
        (((0, 0), (1, 0), (1, 3), (2, 3), (3, 0)), "", "time does not increase in line 4"),
        (POINTS, "time [us], control [V]", "other units"),
        (POINTS[:2], "", "too short"),
        ((*POINTS[:3], (float("nan"), 1)), "", "not finite"),
    ],
)
def test_what_is_wrong_with_a_record_is_said_at_its_key(tmp_path, points, head, said):
    write(tmp_path, points, head)
    (tmp_path / "design.toml").write_text(DESIGN.format(more=""))
    with pytest.raises(InvalidDesign) as caught:
        read_design(tmp_path / "design.toml")
    assert [error.key for error in caught.value.errors] == ["control.record"]
    assert said in str(caught.value)
    assert caught.value.errors[0].line == 2


def test_words_among_the_rows_are_an_error(tmp_path):
    file = write(tmp_path)
    file.write_text(file.read_text() + "end, of it\n")
    with pytest.raises(DesignError, match=r"line 12 .* is no row"):
        read_command(file)


@pytest.mark.parametrize("name", ["gone.csv", "."])
def test_missing_record_is_said(tmp_path, name):
    (tmp_path / "design.toml").write_text(DESIGN.format(more="").replace("command.csv", name))
    with pytest.raises(InvalidDesign, match="no such file"):
        read_design(tmp_path / "design.toml")


def test_keys_that_the_record_sets_are_refused(tmp_path):
    with pytest.raises(InvalidDesign) as caught:
        design(tmp_path, 'high = "3 V"\nperiud = "9 us"')
    assert {error.key for error in caught.value.errors} >= {"control.high", "control.periud"}


def test_a_single_pulse_needs_a_period(tmp_path):
    with pytest.raises(InvalidDesign) as caught:
        design(tmp_path, points=(*POINTS[:5], (8, 0)))
    assert [error.key for error in caught.value.errors] == ["control.period"]


def test_a_period_that_is_too_short_is_said(tmp_path):
    with pytest.raises(InvalidDesign) as caught:
        design(tmp_path, 'period = "2 us"')
    assert [error.key for error in caught.value.errors] == ["control.period"]
