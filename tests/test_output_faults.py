"""Result folders when things go wrong around them: a second run, a killed run, a disk without room.

Outside reference: POSIX (flock, SIGKILL, RLIMIT_FSIZE, errno).
"""

from __future__ import annotations

import errno
import os
import signal
import subprocess
import sys
import textwrap

import pytest

from transim.errors import OutputError
from transim.report.output import ResultFolder


def start(code):
    """Start another Python that says "ready" when it is where it should be."""
    process = subprocess.Popen(
        [sys.executable, "-c", textwrap.dedent(code)], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True
    )
    assert process.stdout.readline() == "ready\n"
    return process


def writing(out):
    return f"""
        from pathlib import Path
        from transim.report.output import ResultFolder
        with ResultFolder(Path({str(out)!r})) as folder:
            (folder / "result.json").write_text("first")
            print("ready", flush=True)
            input()
    """


def test_a_second_run_is_told_at_once_and_the_first_is_whole(tmp_path):
    out = tmp_path / "out"
    first = start(writing(out))
    with pytest.raises(OutputError, match=r"another run is just writing into .*out; wait"), ResultFolder(out):
        pytest.fail("two runs write at once")
    first.communicate("\n", timeout=20)
    assert first.returncode == 0
    assert sorted(file.name for file in out.iterdir()) == ["files.txt", "result.json"]
    assert [file.name for file in tmp_path.iterdir()] == ["out"]


def test_a_killed_run_leaves_nothing_for_the_next(tmp_path):
    out = tmp_path / "out"
    first = start(writing(out))
    first.send_signal(signal.SIGKILL)
    first.communicate(timeout=20)
    assert not out.exists()
    (tmp_path / ".out.b.abcdefgh.transim").mkdir()
    with ResultFolder(out) as folder:
        (folder / "result.json").write_text("second")
    assert (out / "result.json").read_text() == "second"
    # what belongs to a run into another folder, out.b, stays
    assert sorted(file.name for file in tmp_path.iterdir()) == [".out.b.abcdefgh.transim", "out"]


@pytest.mark.parametrize("number", [errno.ENOSPC, errno.EDQUOT, errno.EFBIG, errno.EROFS])
def test_a_disk_without_room_is_one_message(tmp_path, number):
    with pytest.raises(OutputError, match=r"out cannot be written: .*; nothing was left behind"), ResultFolder(
        tmp_path / "out"
    ):
        raise OSError(number, os.strerror(number))
    assert list(tmp_path.iterdir()) == []


def test_a_file_that_may_not_grow_is_one_message(tmp_path):
    code = """
        import resource, sys
        from pathlib import Path
        import numpy as np
        from transim.errors import OutputError
        from transim.report.output import ResultFolder
        resource.setrlimit(resource.RLIMIT_FSIZE, (100_000, resource.RLIM_INFINITY))
        print("ready", flush=True)
        try:
            with ResultFolder(Path(sys.argv[1] if len(sys.argv) > 1 else "PLACE")) as folder:
                np.savez(folder / "waveforms.npz", a=np.random.default_rng(1).random(100_000))
        except OutputError as error:
            print(error)
    """
    process = start(code.replace("PLACE", str(tmp_path / "out")))
    said, _ = process.communicate(timeout=20)
    assert "out cannot be written: File too large" in said
    assert list(tmp_path.iterdir()) == []
