"""The command line without ngspice: commands, options, errors, exit status, and what is imported for them.

Outside references: Python's own TOML reader, and the operating system's exit status.
"""

import json
import os
import re
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

from transim import __version__
from transim.cli import main
from transim.commands.console import Console
from transim.measure.metrics import METRICS
from transim.parts.catalogue import load_catalogue
from transim.quantities import parse_quantity

EXAMPLES = sorted((Path(__file__).parents[1] / "examples").glob("*.toml"))
HEAVY = ("numpy", "scipy", "matplotlib", "PySpice", "pydantic", "rich")
PIN = str(next(file for file in EXAMPLES if file.stem == "commutator_pin"))


@pytest.fixture
def call(capsys):
    def run(*words):
        status = main([str(word) for word in words])
        out, err = capsys.readouterr()
        assert "Traceback" not in err
        return status, out, err

    return run


@pytest.fixture
def design(tmp_path, call):
    file = tmp_path / "design.toml"
    assert call("new", file)[0] == 0
    return file


def process(*words, **options):
    return subprocess.run(
        [sys.executable, *words], capture_output=True, text=True, timeout=60, check=False, **options
    )


@pytest.mark.parametrize("words", [["--help"], ["--version"], ["run", "--help"], ["rnu"], ["run"]])
def test_help_and_usage_errors_load_nothing_heavy(words):
    code = (
        "import sys; from transim.cli import main\n"
        f"main({words!r})\n"
        f"print('loaded', *(name for name in {HEAVY!r} if name in sys.modules))"
    )
    assert process("-c", code).stdout.splitlines()[-1] == "loaded"


def test_python_m_is_the_same_program():
    done = process("-m", "transim", "--version")
    assert (done.returncode, done.stdout) == (0, f"transim {__version__}\n")


@pytest.mark.parametrize("command", ["new", "check", "parts", "deck", "run", "engine"])
def test_every_command_has_help_and_the_common_options(call, command):
    status, out, _ = call(command, "--help")
    assert status == 0
    assert all(option in out for option in ("--json", "--color", "--debug"))
    assert command in call("--help")[1]
    assert max(map(len, out.splitlines())) <= 100


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (["rnu"], "there is no command rnu; did you mean run?"),
        (["run", "--drver", "x", PIN], "--drver"),
        (["run"], "DESIGN"),
        (["run", PIN, "--analysis", "fast"], "'envelope', 'carrier', 'both'"),
        (["run", PIN, "--driver", "fsat"], "did you mean fast?"),
        (["run", "no.toml"], "no.toml: the design file does not exist"),
        (["deck", PIN], "--out"),
        (["parts", "pin_lmped"], "did you mean pin_lumped?"),
        (["new", "x.toml", "--path", "seris_pair"], "did you mean series_pair?"),
        (["parts", "--folder", "no_parts"], "no_parts"),
    ],
)
def test_bad_input_is_one_line_and_exit_2(call, tmp_path, monkeypatch, words, message):
    monkeypatch.chdir(tmp_path)
    status, out, err = call(*words)
    assert (status, out) == (2, "")
    (line,) = err.splitlines()
    assert line.startswith("error: ")
    assert message in line
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("words", [["rnu"], ["run"], ["run", "no.toml"], ["parts", "pin_lmped"]])
def test_a_failure_is_one_document_too(call, tmp_path, words):
    status, out, err = call(*words, "--json", "-")
    document = json.loads(out)
    assert (status, document["exit"], document["format"]) == (2, 2, 1)
    assert err.startswith("error: ")
    file = tmp_path / "e.json"
    assert call(*words, f"--json={file}")[:2] == (2, "")
    assert json.loads(file.read_text()) == document


def test_no_command_shows_the_help(call):
    status, out, err = call()
    assert (status, out) == (2, "")
    assert "Commands:" in err


def test_every_error_of_a_design_is_a_line_with_its_place(call, design):
    text = design.read_text().replace('on_for = "10 us"', 'on_for = "10 uF"').replace("lifetime =", "lifetme =")
    design.write_text(text)
    status, _, err = call("check", design)
    lines = err.splitlines()
    assert (status, len(lines)) == (2, 2)
    wrong = [("on_for", "a capacitance in F"), ("lifetme", "did you mean lifetime?")]
    for line, (key, words) in zip(lines, wrong, strict=True):
        number = 1 + next(k for k, entry in enumerate(text.splitlines()) if entry.startswith(f"{key} ="))
        assert line.startswith(f"error: {design}:{number}:1: ")
        assert words in line
    document = json.loads(call("check", design, "--json", "-")[1])
    assert [error["key"] for error in document["errors"]] == ["control.on_for", "junction.junction1.lifetme"]


def test_debug_shows_the_traceback_and_the_message(capsys):
    assert main(["run", "no.toml", "--debug"]) == 2
    err = capsys.readouterr().err
    assert "Traceback (most recent call last)" in err
    assert err.splitlines()[-1].startswith("error: no.toml: ")


def test_what_nobody_foresaw_is_one_line_that_names_debug(call, monkeypatch):
    def fails(*_arguments):
        raise KeyError("v(p1)")

    monkeypatch.setattr("transim.commands.parts.show_parts", fails)
    status, out, err = call("parts")
    assert (status, out) == (3, "")
    assert err == "error: unexpected KeyError: 'v(p1)'; run again with --debug to see where\n"


def test_new_writes_a_design_that_check_accepts(call, design):
    document = tomllib.loads(design.read_text())
    assert document["switch"]["path"] == "series_pair"
    status, out, err = call("check", design)
    assert (status, err) == (0, "")
    assert out.splitlines()[-1] == f"no errors; next: transim run {design}"


@pytest.mark.parametrize("path", load_catalogue().names("path"))
@pytest.mark.parametrize("driver", load_catalogue().names("driver"))
def test_new_designs_of_every_path_and_driver_are_accepted(call, tmp_path, path, driver):
    file = tmp_path / "design.toml"
    assert call("new", file, "--path", path, "--driver", driver)[0] == 0
    assert tomllib.loads(file.read_text())["driver"][driver]["part"] == driver
    assert call("check", file)[0] == 0


def test_new_never_overwrites_without_force(call, design):
    design.write_text("mine")
    status, _, err = call("new", design)
    assert (status, design.read_text()) == (2, "mine")
    assert "--force" in err
    assert call("new", design, "--force")[0] == 0
    assert design.read_text() != "mine"


def test_new_to_standard_output_is_the_same_text(call, design):
    assert call("new", "-")[1] == design.read_text()
    document = json.loads(call("new", "-", "--json", "-")[1])
    assert document["text"] == design.read_text()


@pytest.mark.parametrize("example", EXAMPLES, ids=lambda file: file.stem)
def test_check_names_everything_that_the_file_sets(call, example):
    status, out, err = call("check", example)
    assert (status, err) == (0, "")
    document = tomllib.loads(example.read_text())
    # the last line names the file
    assert max(map(len, out.splitlines()[:-1])) <= 100
    for name, table in document["driver"].items():
        assert f"driver {name}\n" in out
        assert table["part"] in out
    for table in (document["switch"], *document["junction"].values(), *document["driver"].values()):
        for key, value in table.items():
            if isinstance(value, dict):
                flowed = " ".join(out.split())
                assert all(f"{name} {bound}" in flowed for name, bound in value.items())
            elif key not in ("path", "junction", "part"):
                assert_row(out, key, value)
    for metric, bounds in document["limits"].items():
        assert METRICS[metric].title in out
        assert all(bound in out for bound in bounds.values())
    assert ", ".join(document["carrier"]["frequency"]) in out


def assert_row(text, key, value):
    """Look for a line that starts with the key and holds the value, however it is written."""
    found = re.findall(rf"^ +{key} +(\S+ \S+)", text, re.MULTILINE)
    unit = value.split()[1].lstrip("fpnumkMG") or "m"
    assert parse_quantity(value, unit) in [parse_quantity(entry, unit) for entry in found if entry.endswith(unit)]


def test_check_as_a_document(call):
    document = json.loads(call("check", PIN, "--json", "-")[1])
    assert [driver["name"] for driver in document["drivers"]] == list(
        tomllib.loads(Path(PIN).read_text())["driver"]
    )
    assert document["junctions"]["junction"]["values"]["capacitance"] == 0.15e-12


def test_parts_lists_and_describes_every_part(call):
    catalogue = load_catalogue()
    listed = call("parts")[1]
    for part in catalogue:
        assert f"\n  {part.name} " in listed
        status, out, _ = call("parts", part.name)
        assert status == 0
        assert max(len(line) for line in out.splitlines() if "file:" not in line) <= 100
        flowed = " ".join(out.split())
        for setting in part.settings.values():
            assert f"\n  {setting.name} " in out
            assert setting.range in flowed
        for text in (*part.notes, *part.sources):
            assert " ".join(text.split()) in flowed
    documents = json.loads(call("parts", "--json", "-")[1])["parts"]
    assert [entry["name"] for entry in documents] == [part.name for part in catalogue]


def test_parts_of_the_users_own_are_listed_too(call, tmp_path):
    text = (Path(str(load_catalogue().folders[0])) / "drivers" / "ideal_voltage.cir").read_text()
    (tmp_path / "heron_feed.cir").write_text(text.replace("ideal_voltage", "heron_feed"))
    out = call("parts", "--folder", tmp_path)[1]
    assert "heron_feed" in out
    assert "push_pull_speedup" in out


def test_deck_writes_a_folder_a_driver_and_refuses_a_full_one(call, tmp_path):
    out = tmp_path / "decks"
    status, text, _ = call("deck", PIN, "--out", out)
    assert status == 0
    drivers = list(tomllib.loads(Path(PIN).read_text())["driver"])
    written = {str(file.relative_to(out)) for file in out.rglob("*.cir")}
    assert written == set(text.splitlines()[:-1])
    # the holding current is stepped without a driver
    written.remove("bias_25degC.cir")
    assert {name.split("/")[0] for name in written} == set(drivers)
    assert {name.split("/", 1)[1] for name in written} == {
        "static.cir", "sweep.cir", "video.cir",
        *(f"carrier_{f}/carrier_{phase}.cir" for f in ("30MHz", "150MHz") for phase in ("0", "90", "quiet")),
    }  # fmt: skip
    assert call("deck", PIN, "--out", out)[0] == 2
    assert call("deck", PIN, "--out", out, "--driver", drivers[0], "--force")[0] == 0
    assert {file.name for file in out.iterdir() if file.is_dir()} == {drivers[0]}


def test_decks_of_several_temperatures_have_folders_of_their_own(call, tmp_path, design):
    design.write_text(design.read_text().replace('temperature = ["25 degC"]', 'temperature = ["-40 degC", "85 degC"]'))
    assert call("deck", design, "--out", tmp_path / "decks")[0] == 0
    for name, value in (("-40degC", "-40"), ("85degC", "85")):
        deck = tmp_path / "decks" / f"push_pull_speedup_{name}" / "video.cir"
        assert f"\n.options temp={value}\n" in deck.read_text()


def test_a_full_folder_is_refused_before_anything_runs(call, tmp_path):
    (tmp_path / "mine.txt").write_text("mine")
    # an engine that would leave a trace
    engine = tmp_path / "ngspice"
    engine.write_text(f"#!/bin/sh\ntouch {tmp_path}/started\n")
    engine.chmod(0o755)
    status, out, err = call("run", PIN, "--out", tmp_path, "--ngspice", engine)
    assert (status, out) == (2, "")
    assert "not empty" in err
    assert not (tmp_path / "started").exists()


@pytest.mark.parametrize("command", [["engine"], ["run", PIN]])
def test_a_missing_engine_is_exit_3_and_says_where_it_was_looked_for(call, command, monkeypatch, tmp_path):
    status, out, err = call(*command, "--ngspice", tmp_path / "nowhere")
    assert (status, out) == (3, "")
    assert f"no executable file {tmp_path / 'nowhere'}, as the option asks" in err
    monkeypatch.setenv("TRANSIM_NGSPICE", str(tmp_path / "elsewhere"))
    status, _, err = call(*command)
    assert status == 3
    assert "elsewhere" in err
    assert "environment variable" in err


def test_a_program_that_is_not_ngspice_is_exit_3_without_results(call, tmp_path):
    engine = tmp_path / "ngspice"
    engine.write_text("#!/bin/sh\nexit 0\n")
    engine.chmod(0o755)
    status, out, err = call("run", PIN, "--out", tmp_path / "out", "--ngspice", engine)
    assert (status, out) == (3, "")
    assert err.startswith("error: ")
    assert not (tmp_path / "out").exists()


@pytest.mark.parametrize(("name", "words"), [("no/such/a.json", "there is no folder"), (".", "is a folder")])
def test_a_document_that_cannot_be_written_is_refused_first(call, tmp_path, name, words):
    status, out, err = call("check", PIN, "--json", tmp_path / name)
    assert (status, out) == (2, "")
    assert words in err


def test_color_is_added_and_changes_no_letter(call, monkeypatch):
    plain = call("parts", "--color", "never")[1]
    assert "\x1b" not in plain
    assert call("parts")[1] == plain
    monkeypatch.setenv("NO_COLOR", "1")
    assert call("parts")[1] == plain
    colored = call("parts", "--color", "always")[1]
    assert re.sub(r"\x1b\[[0-9;]*m", "", colored) == plain


def test_verdicts_are_coloured_only_where_colours_are_wanted(capsys):
    for color, expected in (("always", "gate \x1b[1;31mFAIL\x1b[0m; FAILING\n"), ("never", "gate FAIL; FAILING\n")):
        Console(color=color).write(["gate FAIL; FAILING"])
        assert capsys.readouterr().out == expected


def test_output_that_nobody_reads_ends_quietly():
    read, write = os.pipe()
    os.close(read)
    done = subprocess.run(
        [sys.executable, "-m", "transim", "parts"], stdout=write, stderr=subprocess.PIPE, timeout=60, check=False
    )
    os.close(write)
    assert (done.returncode, done.stderr) == (141, b"")


def test_letters_that_the_terminal_lacks_do_not_stop_the_program(design):
    design.write_text(re.sub(r"title = .*", 'title = "Störche, 5 µs"', design.read_text()), encoding="utf-8")
    done = process("-m", "transim", "check", str(design), env={**os.environ, "PYTHONIOENCODING": "ascii"})
    assert (done.returncode, done.stderr) == (0, "")
    assert done.stdout.startswith("St\\xf6rche")
