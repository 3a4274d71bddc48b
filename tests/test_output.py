"""The result folder: whole or not at all, and never over what is not transim's own.

Outside reference: POSIX rename and the file system itself.
"""

import os
import signal
import stat
from pathlib import Path

import pytest

from transim.errors import OutputError
from transim.report.output import LISTING, ResultFolder, write_file


def fill(folder, **files):
    """Write files into a folder, `__` in a name standing for the separator and `_txt` for the ending."""
    for name, text in files.items():
        file = folder / name.replace("__", "/").replace("_txt", ".txt")
        file.parent.mkdir(parents=True, exist_ok=True)
        file.write_text(text)


def names(folder):
    return sorted(entry.name for entry in folder.iterdir())


def content(folder):
    return {
        str(file.relative_to(folder)): file.read_text()
        for file in folder.rglob("*")
        if file.is_file() and file.name != LISTING
    }


def run(path, force=False, **files):
    with ResultFolder(path, force=force) as folder:
        fill(folder, **files)


def interrupt(path, error, force=False, **files):
    with ResultFolder(path, force=force) as folder:
        fill(folder, **files)
        raise error


@pytest.fixture
def out(tmp_path):
    return tmp_path / "results" / "out"


@pytest.mark.parametrize("exists", [True, False])
def test_a_new_or_empty_folder_is_filled_and_listed(out, exists):
    if exists:
        out.mkdir(parents=True)
    run(out, gate__a_txt="1", b_txt="2")
    assert content(out) == {"gate/a.txt": "1", "b.txt": "2"}
    assert sorted((out / LISTING).read_text().split()) == ["b.txt", LISTING, "gate/a.txt"]
    assert names(out.parent) == ["out"]


def test_nothing_is_there_before_the_end(out):
    with ResultFolder(out) as folder:
        fill(folder, a_txt="1")
        assert not out.exists()
        assert folder.parent == out.parent
    assert out.exists()


@pytest.mark.parametrize("error", [ValueError, KeyboardInterrupt, SystemExit])
def test_an_interrupted_run_leaves_what_was_there(out, error):
    run(out, a_txt="1")
    before = {**content(out), LISTING: (out / LISTING).read_text()}
    with pytest.raises(error):
        interrupt(out, error, force=True, a_txt="half", b_txt="half")
    assert {**content(out), LISTING: (out / LISTING).read_text()} == before
    assert names(out.parent) == ["out"]


def test_an_interrupted_first_run_leaves_nothing(out):
    with pytest.raises(SystemExit):
        interrupt(out, SystemExit, a_txt="half")
    assert names(out.parent) == []


def test_a_folder_with_files_is_refused_at_once(out):
    fill(out, mine_txt="mine")
    with pytest.raises(OutputError, match=r"not empty.*--force"):
        ResultFolder(out).__enter__()
    assert content(out) == {"mine.txt": "mine"}


def test_force_replaces_own_files_and_keeps_the_others(out):
    run(out, slow__deep__a_txt="1", slow__b_txt="1", fast__a_txt="1")
    fill(out, mine_txt="mine", fast__mine_txt="mine too")
    run(out, force=True, fast__a_txt="2", new__a_txt="2")
    assert content(out) == {
        "mine.txt": "mine", "fast/mine.txt": "mine too", "fast/a.txt": "2", "new/a.txt": "2",
    }  # fmt: skip
    assert not (out / "slow").exists()
    run(out, force=True, fast__a_txt="3")
    assert content(out) == {"mine.txt": "mine", "fast/mine.txt": "mine too", "fast/a.txt": "3"}


def test_a_signal_among_the_moves_waits_until_all_are_in_place(out, monkeypatch):
    run(out, a_txt="1", b_txt="1")
    real = Path.replace

    def disturbed(self, target):
        if self.name == "a.txt":
            os.kill(os.getpid(), signal.SIGINT)
        return real(self, target)

    monkeypatch.setattr(Path, "replace", disturbed)
    with pytest.raises(KeyboardInterrupt):
        run(out, force=True, a_txt="2", b_txt="2")
    assert content(out) == {"a.txt": "2", "b.txt": "2"}
    assert names(out.parent) == ["out"]


@pytest.mark.parametrize("obstacle", ["a_txt", "a_txt__below_txt", "gate"])
def test_force_does_not_replace_a_file_of_the_user(out, obstacle):
    fill(out, **{obstacle: "mine"})
    before = content(out)
    with pytest.raises(OutputError, match="was not written by transim"):
        run(out, force=True, a_txt="1", gate__b_txt="1")
    assert content(out) == before
    assert names(out.parent) == ["out"]


def test_a_listing_does_not_lead_out_of_the_folder(out):
    fill(out.parent, outside_txt="mine")
    fill(out, a_txt="1")
    (out / LISTING).write_text(f"{LISTING}\n../outside.txt\n{out.parent / 'outside.txt'}\na.txt\n")
    run(out, force=True, b_txt="2")
    assert (out.parent / "outside.txt").read_text() == "mine"
    assert content(out) == {"b.txt": "2"}


def test_a_file_in_place_of_the_folder_is_refused(tmp_path):
    (tmp_path / "out").write_text("mine")
    with pytest.raises(OutputError, match="is a file"):
        run(tmp_path / "out", a_txt="1")


def test_a_link_stays_a_link(tmp_path):
    (tmp_path / "disk").mkdir()
    (tmp_path / "out").symlink_to("disk")
    run(tmp_path / "out", a_txt="1")
    assert (tmp_path / "out").is_symlink()
    assert content(tmp_path / "disk") == {"a.txt": "1"}


def test_results_are_as_readable_as_any_new_folder(out):
    run(out, a_txt="1")
    (out.parent / "plain").mkdir()
    assert stat.S_IMODE(out.stat().st_mode) == stat.S_IMODE((out.parent / "plain").stat().st_mode)
    (out.parent / "plain" / "file").write_text("")
    write_file(out.parent / "written", "")
    assert stat.S_IMODE((out.parent / "written").stat().st_mode) == stat.S_IMODE(
        (out.parent / "plain" / "file").stat().st_mode
    )


def test_a_file_is_written_whole(tmp_path):
    file = tmp_path / "a.json"
    file.write_text("old")
    file.chmod(0o640)
    write_file(file, "new")
    assert (file.read_text(), stat.S_IMODE(file.stat().st_mode)) == ("new", 0o640)
    assert names(tmp_path) == ["a.json"]


@pytest.mark.parametrize(("name", "words"), [("no/such/a.json", "there is no folder"), (".", "is a folder")])
def test_a_file_that_cannot_be_written_is_named(tmp_path, name, words):
    with pytest.raises(OutputError, match=words):
        write_file(tmp_path / name, "text")
