"""The design file: what is read from it, and every error with its file, line, column and key."""

import pickle
import types

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from pydantic import ValidationError

from transim.design.frozen import FrozenMapping
from transim.design.model import Carrier, Control, Numerics
from transim.design.toml import read_design, starting_design
from transim.errors import DesignError, InvalidDesign, QuantityError, TopologyError
from transim.parts.catalogue import Catalogue, load_catalogue
from transim.quantities import format_quantity

METRICS = {
    name: types.SimpleNamespace(unit=unit, title=name)
    for name, unit in {"on_time": "s", "off_time": "s", "isolation": "dB", "video_peak": "V"}.items()
}

PARTS = {
    "reed": """\
* transim part
* name: reed
* role: junction
* terminals: a k
* summary: invented junction
* parameter: lifetime | s | 800 ns | > 0 s .. 10 ms | carrier lifetime
* parameter: ideality | 1 | 1 | 0.5 .. 4 | emission coefficient
.subckt reed a k lifetime=8e-7 ideality=1
R1 a k {lifetime * ideality}
.ends
""",
    "heron": """\
* transim part
* name: heron
* role: junction
* terminals: c b e
* summary: invented transistor
* parameter: gain | 1 | 100 | 1 .. 1000 | BF
* parameter: lead | ohm | 1 ohm | 0 ohm .. 10 ohm | at the base
* model: NPN | jheron
.subckt heron c b e gain=100 lead=1
R1 b b1 {lead}
Q1 c b1 e jheron
.model jheron NPN(bf={gain})
.ends
""",
    "ford": """\
* transim part
* name: ford
* role: path
* terminals: p1 p2 bias
* ports: p1 p2
* bias: bias
* passes: biased
* slot: junction | a k | in series
* summary: invented path
* parameter: dc_block | F | 1 nF | 0.1 pF .. 1 uF | series capacitor
.subckt ford p1 p2 bias dc_block=1e-9
C1 p1 bias {dc_block}
X1 bias p2 junction
.ends
""",
    "weir": """\
* transim part
* name: weir
* role: path
* terminals: p1 p2 bias
* ports: p1 p2
* bias: bias
* passes: biased
* slot: series | a k | in series
* slot: shunt | c b e | to ground
* summary: invented path with two slots
.subckt weir p1 p2 bias
X1 p1 bias series
X2 p2 bias 0 shunt
.ends
""",
    "gate": """\
* transim part
* name: gate
* role: driver
* terminals: ctl out vp
* summary: invented driver
* supply: vp | V | 5 V | 0 V .. 20 V | rail
* parameter: pull_up | ohm | 1 kohm | 1 ohm .. 1 Mohm | from the rail
.subckt gate ctl out vp pull_up=1000
R1 vp out {pull_up}
R2 ctl out 1000
.ends
""",
}

DESIGN = """\
title = "Antenna commutator for wildlife tags"
[control]
low = "0 V"
high = "3.3 V"
edge = "2 ns"
on_for = "2 us"
period = "10 us"
[carrier]
frequency = ["30 MHz", "150 MHz"]
[switch]
path = "ford"
junction = "tag"
dc_block = "2.2 nF"
[junction.tag]
part = "reed"
lifetime = "500 ns"
[driver.north]
part = "gate"
vp = "12 V"
[driver.south]
part = "gate"
pull_up = "4k7 ohm"
[limits]
on_time = { max = "150 ns" }
isolation = { min = "40 dB", max = "80 dB" }
[measure]
basis = "power"
video_bandwidth = "500 MHz"
[environment]
temperature = "-20 degC"
[numerics]
steps = 800
reltol = 1e-3
"""

CARD = "* invented\n.model HERON9 NPN(IS=1e-15\n+ BF=210)\n"


@pytest.fixture(scope="module")
def catalogue(tmp_path_factory):
    folder = tmp_path_factory.mktemp("parts")
    for name, text in PARTS.items():
        (folder / f"{name}.cir").write_text(text)
    return Catalogue([folder])


@pytest.fixture
def read(tmp_path, catalogue):
    """Write a text as a design file and read it."""

    def read_text(text):
        file = tmp_path / "design.toml"
        file.write_text(text, encoding="utf-8")
        return read_design(file, catalogue=catalogue, metrics=METRICS)

    return read_text


@pytest.fixture
def errors_of(read):
    """Write a text as a design file and return its errors."""

    def errors(text):
        with pytest.raises(InvalidDesign) as caught:
            read(text)
        return caught.value.errors

    return errors


def line_of(text, beginning):
    return next(number for number, line in enumerate(text.splitlines(), 1) if line.startswith(beginning))


def test_complete_design_is_read_in_si_units(read):
    design = read(DESIGN)
    assert design.title == "Antenna commutator for wildlife tags"
    control = design.control
    assert (control.low, control.high, control.edge, control.on_for) == (0.0, 3.3, 2e-9, 2e-6)
    assert (control.period, control.pulses) == (1e-5, 1)
    assert (design.carrier.frequency, design.carrier.level, design.carrier.impedance) == (
        (3e7, 1.5e8),
        (-10.0,),
        50.0,
    )
    assert design.switch.path.name == "ford"
    assert design.switch.values == {"dc_block": 2.2e-9}
    junction = design.switch.junctions["junction"]
    assert (junction.name, junction.part.name, junction.model) == ("tag", "reed", None)
    assert junction.values == {"lifetime": 5e-7, "ideality": 1.0}
    assert [(driver.name, dict(driver.values)) for driver in design.drivers] == [
        ("north", {"vp": 12.0, "pull_up": 1000.0}),
        ("south", {"vp": 5.0, "pull_up": 4700.0}),
    ]
    assert [(limit.metric, limit.min, limit.max) for limit in design.limits] == [
        ("on_time", None, 1.5e-7),
        ("isolation", 40.0, 80.0),
    ]
    assert (design.definitions.basis, design.definitions.video_bandwidth) == ("power", 5e8)
    assert design.definitions.settle_band == 0.5
    assert design.environment.temperature == (-20.0,)
    assert (design.numerics.steps, design.numerics.reltol, design.numerics.timeout) == (800, 1e-3, 60.0)
    assert design.source.text == DESIGN


def test_tables_with_defaults_may_be_left_out(read):
    design = read(DESIGN[DESIGN.index("[control]") : DESIGN.index("[limits]")])
    assert design.title == "design"
    assert (design.limits, design.environment.temperature) == ((), (25.0,))
    assert design.numerics == Numerics()
    assert design.definitions.reference == "static"


def test_design_is_frozen_hashable_and_can_be_sent_to_a_process(read):
    design = read(DESIGN)
    with pytest.raises(ValidationError, match="frozen"):
        design.title = "other"
    with pytest.raises(TypeError):
        design.switch.values["dc_block"] = 1.0
    copy = pickle.loads(pickle.dumps(design))
    assert copy == design
    assert hash(copy) == hash(design)
    assert copy != read(DESIGN.replace("2.2 nF", "2.3 nF"))


def test_frozen_mapping_keeps_order_and_does_not_follow_its_original():
    original = {"b": 1, "a": 2}
    mapping = FrozenMapping(original)
    original["c"] = 3
    assert list(mapping) == ["b", "a"]
    assert mapping == {"a": 2, "b": 1}
    assert "b" in repr(mapping)


# What is replaced in DESIGN by what; key, beginning of the line, what the error says and the nearest name.
FAULTS = [
    ("[control]", "titel = 3\n[control]", "titel", "titel", "unknown key", "title"),
    ('title = "A', 'title = "A\\n', "title", "title", "line break", None),
    ('title = "Antenna', 'title = "' + 200 * "x", "title", "title", "too long", None),
    ('title = "Antenna commutator for wildlife tags"', 'title = " "', "title", "title", "is empty", None),
    (
        'title = "Antenna commutator for wildlife tags"',
        "title = 1979-05-27",
        "title",
        "title",
        "a date",
        None,
    ),
    ("[environment]", "[enviroment]", "enviroment", "[enviroment]", "unknown key", "environment"),
    ('edge = "2 ns"', "edge = 2e-9", "control.edge", "edge", 'for example "150 ns"', None),
    ('edge = "2 ns"', "edge = true", "control.edge", "edge", "found true", None),
    ('edge = "2 ns"', 'edge = "2 nV"', "control.edge", "edge", "this is a voltage", None),
    ('edge = "2 ns"', 'edge = "0 s"', "control.edge", "edge", "> 0 s .. 1 ks; found 0 s", None),
    ('edge = "2 ns"', 'edge = "3 us"', "control.edge", "edge", "longer than the pulse", None),
    ('edge = "2 ns"', 'edg = "2 ns"', "control.edg", "edg", "unknown key", "edge"),
    ('edge = "2 ns"\n', "", "control.edge", "[control]", "key is missing", None),
    ('on_for = "2 us"', 'on_for = "10 us"', "control.on_for", "on_for", "off for a part", None),
    ('high = "3.3 V"', 'high = "0 mV"', "control.high", "high", "above the low", None),
    ('period = "10 us"', 'period = "10 us"\npulses = 0', "control.pulses", "pulses", "1 .. 1000", None),
    ('period = "10 us"', 'period = "10 us"\npulses = "2"', "control.pulses", "pulses", "whole number", None),
    ('period = "10 us"', 'period = "10 us"\npulses = 2.0', "control.pulses", "pulses", "whole number", None),
    ('["30 MHz", "150 MHz"]', "[]", "carrier.frequency", "frequency", "at least one", None),
    ('["30 MHz", "150 MHz"]', '"0 Hz"', "carrier.frequency", "frequency", "> 0 Hz", None),
    ('["30 MHz", "150 MHz"]', '["30 MHz", 1]', "carrier.frequency[1]", "frequency", "bare number", None),
    ('"150 MHz"]', '"0.03 GHz"]', "carrier.frequency[1]", "frequency", "stands twice", None),
    ('frequency = ["30 MHz", "150 MHz"]', "", "carrier.frequency", "[carrier]", "key is missing", None),
    ('path = "ford"', 'path = "fort"', "switch.path", "path", "no path part named fort", "ford"),
    ('path = "ford"', 'path = "gate"', "switch.path", "path", "gate is a driver", None),
    ('path = "ford"', 'path = "ford\\n.end"', "switch.path", "path", "line break", None),
    (
        'path = "ford"',
        'path = "missing.cir"',
        "switch.path",
        "path",
        "missing.cir: the file does not exist",
        None,
    ),
    ('path = "ford"\n', "", "switch.path", "[switch]", "key is missing", None),
    ('junction = "tag"', 'junction = "tga"', "switch.junction", "junction = ", "no table", "tag"),
    ('dc_block = "2.2 nF"', 'dc_blok = "2.2 nF"', "switch.dc_blok", "dc_blok", "no such key", "dc_block"),
    (
        'dc_block = "2.2 nF"',
        'dc_block = "2 F"',
        "switch.dc_block",
        "dc_block",
        "100 fF .. 1 uF; found 2 F",
        None,
    ),
    ('dc_block = "2.2 nF"', 'series = "tag"', "switch.series", "series", "no such key", None),
    ('part = "reed"', 'part = "rede"', "junction.tag.part", 'part = "rede"', "no junction part", "reed"),
    ('part = "reed"\n', "", "junction.tag.part", "[junction.tag]", "key is missing", None),
    ('part = "reed"', 'part = "heron"', "switch.junction", "junction = ", "terminals c b e", None),
    ('part = "reed"', 'part = "reed"\nmodel = "x"', "junction.tag.model", "model", "no such key", None),
    (
        'part = "reed"',
        'part = "reed"\nideality = "1"',
        "junction.tag.ideality",
        "ideality",
        "without quotes",
        None,
    ),
    ('part = "reed"', 'part = "reed"\nideality = nan', "junction.tag.ideality", "ideality", "finite", None),
    (
        'part = "reed"',
        f'part = "reed"\nideality = 1{"0" * 400}',
        "junction.tag.ideality",
        "ideality",
        "finite",
        None,
    ),
    (
        "[driver.north]",
        '[junction.spare]\npart = "reed"\n[driver.north]',
        "junction.spare",
        "[junction.spare]",
        "not used",
        None,
    ),
    (
        "[driver.north]",
        '[junction."t\\n.end"]\npart = "reed"\n[driver.north]',
        'junction."t\\n.end"',
        '[junction."t',
        "name cannot be used",
        None,
    ),
    (
        "[driver.south]",
        "[driver.North]",
        "driver.North",
        "[driver.North]",
        "only in upper and lower case",
        None,
    ),
    ('vp = "12 V"', 'vp = "12 A"', "driver.north.vp", "vp", "this is a current", None),
    ('vp = "12 V"', 'vn = "12 V"', "driver.north.vn", "vn", "no such key", None),
    (
        '[driver.north]\npart = "gate"',
        "[driver.north]",
        "driver.north.part",
        "[driver.north]",
        "missing",
        None,
    ),
    (
        "[driver.north]",
        "[driver]\nnorth2 = 3\n[driver.north]",
        "driver.north2",
        "north2",
        "[driver.NAME]",
        None,
    ),
    ("on_time =", "on_tme =", "limits.on_tme", "on_tme", "no such metric", "on_time"),
    ('max = "150 ns"', 'max = "150 mV"', "limits.on_time.max", "on_time", "this is a voltage", None),
    ('max = "150 ns"', "max = 1", "limits.on_time.max", "on_time", "bare number", None),
    ('max = "150 ns"', 'maks = "150 ns"', "limits.on_time", "on_time", "neither min nor max", None),
    ('{ max = "150 ns" }', '"150 ns"', "limits.on_time", "on_time", "on_time = { max =", None),
    ('min = "40 dB"', 'min = "90 dB"', "limits.isolation.min", "isolation", "above the maximum", None),
    ('basis = "power"', 'basis = "pwer"', "measure.basis", "basis", '"voltage" or "power"', "power"),
    (
        'temperature = "-20 degC"',
        'temperature = "-300 degC"',
        "environment.temperature",
        "temperature",
        "> -273.15 degC",
        None,
    ),
    ("reltol = 1e-3", 'reltol = "1e-3"', "numerics.reltol", "reltol", "without quotes", None),
    ("reltol = 1e-3", 'timeout = "0 s"', "numerics.timeout", "timeout", "> 0 s", None),
    ("reltol = 1e-3", 'solution = "frozn"', "numerics.solution", "solution", "unknown choice", "frozen"),
    ('title = "A', 'parts = "none"\ntitle = "A', "parts", "parts", "does not exist", None),
]


@pytest.mark.parametrize(("old", "new", "key", "beginning", "message", "nearest"), FAULTS)
def test_fault_is_reported_with_its_place(errors_of, tmp_path, old, new, key, beginning, message, nearest):
    text = DESIGN.replace(old, new, 1)
    assert text != DESIGN
    errors = errors_of(text)
    found = [error for error in errors if error.key == key and message in str(error)]
    # A second error may follow from the first: a mistyped key is also a missing one.
    assert (len(found), len(errors)) in {(1, 1), (1, 2)}, errors
    assert (found[0].file, found[0].line) == (tmp_path / "design.toml", line_of(text, beginning))
    assert found[0].column >= 1
    assert found[0].nearest == nearest


def test_all_faults_of_a_file_are_reported_together_in_its_order(errors_of):
    changes = [
        ('low = "0 V"', "low = 0"),
        ('"150 MHz"', '"150 MHZ"'),
        ('"2.2 nF"', '"2.2 ns"'),
        ('"500 ns"', '"500 s"'),
        ('pull_up = "4k7 ohm"', 'pullup = "4k7 ohm"'),
        ('max = "80 dB"', 'max = "80 V"'),
        ("steps = 800", "steps = 0"),
    ]
    text = DESIGN
    for old, new in changes:
        text = text.replace(old, new)
    errors = errors_of(text)
    assert [error.key for error in errors] == [
        "control.low",
        "carrier.frequency[1]",
        "switch.dc_block",
        "junction.tag.lifetime",
        "driver.south.pullup",
        "limits.isolation.max",
        "numerics.steps",
    ]
    assert [error.line for error in errors] == sorted(error.line for error in errors)
    assert [(error.line, error.column) for error in errors[:2]] == [(3, 1), (9, 24)]
    assert isinstance(errors[1], QuantityError)


def test_empty_file_misses_its_tables(errors_of):
    assert {error.key for error in errors_of("")} == {"control", "carrier", "switch", "driver"}
    assert {error.key for error in errors_of("control = 3\nlimits = []\n")} >= {"control", "limits"}


def test_edge_as_long_as_the_pause_is_accepted_and_a_longer_one_refused(read, errors_of):
    text = DESIGN.replace('"2 us"', '"9 us"')
    assert read(text.replace('edge = "2 ns"', 'edge = "1 us"')).control.edge == 1e-6
    (error,) = errors_of(text.replace('edge = "2 ns"', 'edge = "1.01 us"'))
    assert error.key == "control.edge"
    assert "pause" in error.message


def test_slots_of_a_path_are_filled_by_name(read, errors_of):
    text = DESIGN.replace('"ford"', '"weir"').replace('dc_block = "2.2 nF"', 'shunt = "npn"')
    text = text.replace("[driver.north]", '[junction.npn]\npart = "heron"\n[driver.north]')
    junctions = read(text).switch.junctions
    assert {slot: junction.name for slot, junction in junctions.items()} == {"series": "tag", "shunt": "npn"}
    assert junctions == read(text.replace('junction = "tag"', 'series = "tag"')).switch.junctions
    (error,) = errors_of(text.replace('junction = "tag"', 'junction = "tag"\nseries = "tag"'))
    assert (error.key, error.line) == ("switch.junction", 12)
    assert "fills no slot" in error.message
    (error, *_) = errors_of(text.replace('junction = "tag"\n', ""))
    assert (error.key, error.line) == ("switch.junction", 10)
    misfit, unused = errors_of(text.replace('shunt = "npn"', 'shunt = "tag"'))
    assert (misfit.key, unused.key) == ("switch.shunt", "junction.npn")


def test_mistyped_junction_is_one_error(errors_of):
    (error,) = errors_of(DESIGN.replace('junction = "tag"', 'junction = "tga"'))
    assert (error.key, error.nearest) == ("switch.junction", "tag")
    missing, unused = errors_of(DESIGN.replace('junction = "tag"', 'junction = "other"'))
    assert (missing.key, missing.nearest, unused.key) == ("switch.junction", None, "junction.tag")


def test_junction_that_does_not_fit_its_slot_is_a_topology_error(errors_of):
    (error,) = errors_of(DESIGN.replace('"reed"\nlifetime = "500 ns"', '"heron"'))
    assert isinstance(error, TopologyError)
    assert (error.key, error.expected) == ("switch.junction", "a part with the terminals a k")


def with_model(extra=""):
    text = DESIGN.replace('"ford"', '"weir"').replace('dc_block = "2.2 nF"', 'shunt = "npn"')
    table = f'[junction.npn]\npart = "heron"\nmodel = "heron9.lib"\n{extra}[driver.north]'
    return text.replace("[driver.north]", table)


def test_model_card_replaces_that_of_the_part(read, tmp_path):
    (tmp_path / "heron9.lib").write_text(CARD)
    junction = read(with_model('lead = "2 ohm"\n')).switch.junctions["shunt"]
    assert junction.model == ".model jheron NPN(IS=1e-15 BF=210)"
    assert junction.values["lead"] == 2.0


def test_parameter_that_a_model_card_makes_useless_is_refused(errors_of, tmp_path):
    (tmp_path / "heron9.lib").write_text(CARD)
    (error,) = errors_of(with_model("gain = 50\n"))
    assert error.key == "junction.npn.gain"
    assert "replaces this parameter" in error.message


def test_model_file_that_cannot_be_used_is_named_with_its_line(errors_of, tmp_path):
    (tmp_path / "heron9.lib").write_text(CARD + ".include /etc/passwd\n")
    (error,) = errors_of(with_model())
    assert (error.key, error.line) == ("junction.npn.model", line_of(with_model(), "model"))
    assert f"{tmp_path / 'heron9.lib'}:4" in error.message
    (tmp_path / "heron9.lib").unlink()
    (error,) = errors_of(with_model())
    assert "does not exist" in error.message


def test_part_file_of_the_user_is_relative_to_the_design(read, errors_of, tmp_path):
    (tmp_path / "own").mkdir()
    file = tmp_path / "own" / "gate2.cir"
    own = PARTS["gate"].replace("gate", "gate2").replace("1 kohm", "2 kohm").replace("=1000", "=2000")
    file.write_text(own)
    text = DESIGN.replace('part = "gate"\nvp', 'part = "own/gate2.cir"\nvp')
    assert read(text).drivers[0].values["pull_up"] == 2000.0
    by_folder = 'parts = "own"\n' + DESIGN.replace('part = "gate"\nvp', 'part = "gate2"\nvp')
    assert read(by_folder).drivers[0].part == read(text).drivers[0].part
    (error,) = errors_of(DESIGN.replace('path = "ford"', 'path = "own/gate2.cir"'))
    assert "the part is a driver" in error.message
    file.write_text(file.read_text().replace("R2", ".control\nR2"))
    (error,) = errors_of(text)
    assert (error.key, f"{file}:10:" in error.message) == ("driver.north.part", True)


@pytest.mark.parametrize(
    ("content", "message", "place"),
    [
        (b"a = 1\nb = ", "invalid value", (2, 5)),
        (b"a = 1\n[b\n", "']'", (2, 3)),
        (b"[control]\nlow = '0 V'\nlow = '1 V'\n", "overwrite", (3, 12)),
        (b"title = 'a\nb'", "no valid TOML", (1, 11)),
        (b"title = 'x'\n# \xe9\n", "not UTF-8", (2, 3)),
        (b"a = " + b"[" * 100_000, "nests", (None, None)),
        (b"a = " + b"1" * 5000, "no valid TOML", (None, None)),
        (b"#" * 1_100_000, "larger than 1 MB", (None, None)),
    ],
)
def test_file_that_is_no_toml_is_refused_with_its_place(tmp_path, content, message, place):
    file = tmp_path / "design.toml"
    file.write_bytes(content)
    with pytest.raises(InvalidDesign, match=message) as caught:
        read_design(file)
    (error,) = caught.value.errors
    assert error.file == file
    assert (error.line, error.column) == place


def test_file_that_is_not_there_or_a_folder_is_refused(tmp_path):
    for file, message in ((tmp_path / "none.toml", "does not exist"), (tmp_path, "folder")):
        with pytest.raises(InvalidDesign, match=message) as caught:
            read_design(file)
        assert caught.value.errors[0].file == file
        assert caught.value.exit_code == 2
    with pytest.raises(InvalidDesign, match="cannot be read"):
        read_design(tmp_path / ("x" * 300))


def test_file_with_a_byte_order_mark_and_windows_line_ends_is_read(tmp_path, catalogue):
    file = tmp_path / "design.toml"
    file.write_bytes(b"\xef\xbb\xbf" + DESIGN.replace("\n", "\r\n").encode())
    assert read_design(str(file), catalogue=catalogue, metrics=METRICS).control.period == 1e-5


def test_models_take_si_floats_in_python_and_check_them_alike():
    assert Control(low=0, high=5.0, edge=1e-9, on_for=1e-6, period=2e-6).high == 5.0
    assert Carrier(frequency=[1e8]).frequency == (1e8,)
    with pytest.raises(ValidationError, match="out of range"):
        Carrier(frequency=[-1e8])
    with pytest.raises(ValidationError, match="above the low level"):
        Control(low=5.0, high=5.0, edge=1e-9, on_for=1e-6, period=2e-6)


positive = st.floats(min_value=1e-11, max_value=1e-3, allow_nan=False)


@settings(max_examples=40, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    lifetime=positive,
    ideality=st.floats(min_value=0.5, max_value=4.0),
    frequency=st.lists(st.floats(min_value=1.0, max_value=1e12), min_size=1, max_size=4, unique=True),
    level=st.floats(min_value=-200.0, max_value=80.0),
)
def test_values_written_with_units_read_back_exactly(read, lifetime, ideality, frequency, level):
    carriers = ", ".join(f'"{format_quantity(value, "Hz", 17)}"' for value in frequency)
    text = DESIGN.replace('"500 ns"', f'"{format_quantity(lifetime, "s", 17)}"\nideality = {ideality!r}')
    text = text.replace('["30 MHz", "150 MHz"]', f"[{carriers}]")
    text = text.replace("[switch]", f'level = "{format_quantity(level, "dBm", 17)}"\n[switch]')
    design = read(text)
    assert design.switch.junctions["junction"].values == {"lifetime": lifetime, "ideality": ideality}
    assert design.carrier.frequency == tuple(frequency)
    assert design.carrier.level == (level,)


@settings(max_examples=40, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(position=st.integers(0, len(DESIGN)), junk=st.text(max_size=3), length=st.integers(0, 12))
def test_damaged_file_is_read_or_refused_but_nothing_else(read, position, junk, length):
    damaged = DESIGN[:position] + junk + DESIGN[position + length :]
    try:
        outcome = read(damaged).drivers
    except InvalidDesign as exc:
        outcome = tuple(error.message for error in exc.errors)
    assert outcome
    assert all(outcome)


def test_starting_design_has_every_key_and_the_defaults(catalogue, tmp_path):
    file = tmp_path / "new.toml"
    for path in ("ford", "weir"):
        text = starting_design(path, "gate", catalogue, metrics=METRICS)
        file.write_text(text)
        design = read_design(file, catalogue=catalogue, metrics=METRICS)
        assert design.numerics == Numerics()
        for chosen in (*design.switch.junctions.values(), *design.drivers):
            assert chosen.values == {name: setting.default for name, setting in chosen.part.settings.items()}
            for name, setting in chosen.part.settings.items():
                lines = [line for line in text.splitlines() if line.startswith(f"{name} = ")]
                assert any(setting.meaning in line for line in lines)
        assert len(design.switch.junctions) == len(design.switch.path.slots)
        assert all(f"{metric} = {{" in text for metric in METRICS)


def test_starting_design_needs_a_junction_that_fits(tmp_path):
    for name in ("ford", "gate", "heron"):
        (tmp_path / f"{name}.cir").write_text(PARTS[name])
    with pytest.raises(DesignError, match="no junction part fits the slot junction"):
        starting_design("ford", "gate", Catalogue([tmp_path]), metrics=METRICS)


def test_starting_design_of_every_shipped_path_and_driver_is_accepted(tmp_path):
    catalogue = load_catalogue()
    file = tmp_path / "new.toml"
    for path in catalogue.names("path"):
        for driver in catalogue.names("driver"):
            file.write_text(starting_design(path, driver, catalogue))
            design = read_design(file, catalogue=catalogue)
            assert (design.switch.path.name, design.drivers[0].part.name) == (path, driver)
            assert design.limits
