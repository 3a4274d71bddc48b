"""ngspice as a process: found, started in a folder of its own, watched, and its failures named.

This is the only module of the project that starts a process. Each deck has its own, so that a crash stays
with its deck, memory does not grow over a study, and a run can be ended at any time.
"""

from __future__ import annotations

import contextlib
import os
import re
import select
import shutil
import signal
import subprocess
import tempfile
import threading
import time
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import IO

from transim.engine import bounds
from transim.engine.log import log_tail, warnings_in
from transim.engine.rawfile import Plot, read_raw
from transim.engine.verdict import Attempt, check_end, check_plots
from transim.errors import EngineError, EngineNotFound, OutputError, RawFileError

__all__ = ["OLDEST", "TESTED", "Engine", "EngineRun", "discard_kept", "end_all", "find_engine"]

VARIABLE = "TRANSIM_NGSPICE"
LOG_LIMIT = 16 * 2**20
LONGEST_TIMEOUT = 1e6
KEPT_VARIABLES = ("LD_LIBRARY_PATH", "DYLD_LIBRARY_PATH", "TMPDIR")
#: The log's size is looked at this often [s].
_LOOK = 0.25
_PRIVATE = "transim-"
_running: set[subprocess.Popen[bytes]] = set()
#: Oldest version that is run, and the one that everything here was tested with.
OLDEST, TESTED = 36, 39
INSTALL = "install it (apt-get install ngspice, or brew install ngspice)"


@dataclass(frozen=True)
class EngineRun:
    """What one successful run gave.

    Parameters
    ----------
    plots : tuple of Plot
        Every plot of the raw file, in its order; each has at least one point.
    log : str
        Standard output, then standard error; complete up to 16 MiB, then its head and its tail.
    seconds : float
        Wall time of the process [s].
    deck : Path
        The deck that was run; gone after the run where no folder was given.
    warnings : tuple of str
        What ngspice warned of and went on: an ignored model parameter, a singular matrix that was overcome.
    """

    plots: tuple[Plot, ...]
    log: str
    seconds: float
    deck: Path
    warnings: tuple[str, ...] = ()


@dataclass(frozen=True)
class _Outcome:
    """How a process ended: return code (None: it was stopped at the time limit), output, wall time."""

    return_code: int | None
    output: str
    errors: str
    seconds: float
    flooded: bool = False

    @property
    def log(self) -> str:
        return self.output + self.errors


@dataclass(frozen=True)
class Engine:
    """An ngspice executable.

    Parameters
    ----------
    path : Path
        The executable.
    """

    path: Path

    @cached_property
    def version(self) -> int:
        """Major version; the executable is asked once, when this is first read.

        Raises
        ------
        EngineNotFound
            Where the executable does not say that it is ngspice, or is older than 36.
        """
        command = [str(self.path), "--version"]
        with _private_folder(None) as folder:
            outcome = _execute(command, folder, timeout=10.0)
        found = re.search(r"ngspice-(\d+)", outcome.log)
        if found is None:
            raise EngineNotFound(
                f"{self.path} does not say that it is ngspice; {INSTALL}, or name another executable",
                command=command,
                return_code=outcome.return_code,
                log_tail=log_tail(outcome.log),
            )
        return self._accepted(int(found[1]))

    def _accepted(self, version: int) -> int:
        if version < OLDEST:
            raise EngineNotFound(
                f"{self.path} is ngspice {version}, and {OLDEST} or newer is needed ({TESTED} is what transim was "
                f"tested with); {INSTALL}, or name another executable in the environment variable {VARIABLE}"
            )
        return version

    def run(
        self,
        deck: str,
        *,
        folder: Path | None = None,
        name: str = "deck",
        timeout: float = 60.0,
        stop_time: float | None = None,
        writes_raw: bool = False,
    ) -> EngineRun:
        """Run one deck.

        Parameters
        ----------
        deck : str
            The whole deck, from its title line to ``.end``.
        folder : Path or None
            Where NAME.cir, NAME.raw and NAME.log are written, and stay. None: a private folder, removed
            after a success; after a failure its deck and log stay, and the error says where.
        name : str
            NAME: letters, digits and ``_ . + -``.
        timeout : float
            Longest wall time [s].
        stop_time : float or None
            Time that every transient of the deck must reach [s].
        writes_raw : bool
            True where a ``.control`` block of the deck itself writes NAME.raw and ends with ``quit 0``.
            False where the deck has analysis cards.

        Returns
        -------
        EngineRun
            The plots and the log.

        Raises
        ------
        DeckRejected
            A syntax error, an unknown name, no analysis, or a ``.control`` block that failed.
        ConvergenceError
            No operating point, or a transient that did not reach its stop.
        EngineTimeout
            The run took longer than `timeout`, and was stopped.
        EngineCrashed
            The process was ended by a signal.
        RawFileError
            The raw file is cut short or not understood.
        EngineNotFound
            The executable cannot be started.
        OutputError
            The folder cannot be written.
        ValueError
            `name` cannot be a file name, or `timeout` is not between 0 and 1e6 s.
        """
        if not re.fullmatch(r"\w[\w.+-]*", name, re.ASCII):
            raise ValueError(f"a deck cannot be called {name!r}; use letters, digits and _ . + -")
        if not 0 < timeout < LONGEST_TIMEOUT:
            raise ValueError(f"the time limit must be above 0 s and below 1e6 s; found {timeout!r}")
        with _private_folder(folder) as place:
            return self._run(deck, place / f"{name}.cir", timeout, stop_time, writes_raw)

    def _run(
        self, text: str, deck: Path, timeout: float, stop_time: float | None, writes_raw: bool
    ) -> EngineRun:
        raw, log = deck.with_name(f"{deck.stem}.raw"), deck.with_name(f"{deck.stem}.log")
        with _writing(deck.parent):
            raw.unlink(missing_ok=True)
            log.unlink(missing_ok=True)
            deck.write_text(text, encoding="utf-8", newline="\n")
        command = [str(self.path), "-b", "-n", *([] if writes_raw else ["-r", raw.name]), deck.name]
        outcome = _execute(command, deck.parent, timeout)
        with _writing(deck.parent):
            log.write_text(outcome.log, encoding="utf-8", newline="\n")
        said = re.search(r"ngspice-(\d+) done", outcome.output[-200:])
        if said is not None:
            # A deck that quits by itself names the version: no need to ask for it.
            vars(self).setdefault("version", self._accepted(int(said[1])))
        attempt = Attempt(
            deck, raw, stop_time, writes_raw, tuple(command), outcome.return_code, outcome.log, outcome.flooded
        )
        check_end(attempt, outcome.errors, timeout)
        try:
            plots = read_raw(raw)
        except RawFileError as exc:
            raise RawFileError(exc.message, **attempt.context) from exc
        check_plots(attempt, plots)
        return EngineRun(plots, outcome.log, outcome.seconds, deck, warnings_in(outcome.errors))


def find_engine(option: str | None = None) -> Engine:
    """Find the ngspice executable.

    Parameters
    ----------
    option : str or None
        A path, or a name to look for on PATH. It beats the environment variable TRANSIM_NGSPICE, which
        beats ``ngspice`` on PATH. What was asked for and is missing is never replaced by another.

    Returns
    -------
    Engine
        The executable; it is not started.

    Raises
    ------
    EngineNotFound
        Where there is no such executable; says where it was looked for.
    """
    variable = os.environ.get(VARIABLE)
    if option:
        asked, origin = option, "as the option asks"
    elif variable:
        asked, origin = variable, f"as the environment variable {VARIABLE} asks"
    else:
        asked, origin = "ngspice", "on PATH"
    # A Path would drop the leading "./" that keeps the search off PATH.
    found = shutil.which(str(Path(asked).expanduser()) if asked.startswith("~") else asked)
    if found is not None:
        return Engine(Path(found).absolute())
    if os.sep in asked:
        looked = f"no executable file {asked}, {origin}"
    else:
        looked = f"no executable '{asked}' {origin}; PATH is {os.environ.get('PATH', 'empty')}"
    raise EngineNotFound(
        f"ngspice was not found: {looked}; {INSTALL}, or name its path in the environment variable {VARIABLE}"
    )


def discard_kept(error: EngineError) -> None:
    """Remove the private folder that a failed run has kept, once its failure is dealt with.

    Parameters
    ----------
    error : EngineError
        Of the run; where its deck lies in a folder that was asked for, nothing is removed.
    """
    deck = error.deck
    if deck is not None and deck.parent.name.startswith(_PRIVATE) and _in_scratch(deck.parent):
        shutil.rmtree(deck.parent, ignore_errors=True)


def _in_scratch(folder: Path) -> bool:
    return folder.parent.absolute() == Path(tempfile.gettempdir()).absolute()


@contextlib.contextmanager
def _private_folder(folder: Path | None) -> Iterator[Path]:
    """Give the folder to run in; a private one is kept only after a failure of the engine."""
    if folder is not None:
        with _writing(folder):
            folder.mkdir(parents=True, exist_ok=True)
        yield folder.absolute()
        return
    with _writing(Path(tempfile.gettempdir())):
        private = Path(tempfile.mkdtemp(prefix=_PRIVATE))
    keep = False
    try:
        yield private
    except EngineError as exc:
        keep = exc.deck is not None
        # The deck makes its samples again; a study of many failures must not fill the disk.
        if not isinstance(exc, RawFileError):
            for raw in private.glob("*.raw"):
                raw.unlink()
        raise
    finally:
        if not keep:
            shutil.rmtree(private, ignore_errors=True)


@contextlib.contextmanager
def _writing(folder: Path) -> Iterator[None]:
    try:
        yield
    except OSError as exc:
        raise OutputError(f"the folder {folder} cannot be written: {exc.strerror}") from exc


def _execute(command: list[str], folder: Path, timeout: float) -> _Outcome:
    """Run a process to its end, to the time limit, or to an exception; nothing of it is left running."""
    environment = {key: os.environ[key] for key in KEPT_VARIABLES if key in os.environ}
    environment |= {"PATH": "/usr/bin:/bin", "HOME": str(folder), "LC_ALL": "C", "OMP_NUM_THREADS": "1"}
    # Two files, since ngspice buffers one stream and not the other and would cut lines in two.
    with _scratch(folder) as output, _scratch(folder) as errors:
        started = time.perf_counter()
        process, ended = None, False
        try:
            with _undisturbed():
                process = subprocess.Popen(
                    command,
                    cwd=folder,
                    env=environment,
                    stdin=subprocess.DEVNULL,
                    stdout=output,
                    stderr=errors,
                    start_new_session=True,
                )
                _running.add(process)
            bounds.bound_process(process.pid, timeout)
            ended = _wait(process, timeout, (output, errors))
        except OSError as exc:
            raise EngineNotFound(
                f"{command[0]} cannot be started: {exc.strerror}; {INSTALL}", command=command
            ) from exc
        finally:
            if process is not None:
                _end_group(process)
                _running.discard(process)
        seconds = time.perf_counter() - started
        flooded = not ended and any(_size(log) > bounds.LOG_ROOM for log in (output, errors))
        return _Outcome(process.returncode if ended else None, _text(output), _text(errors), seconds, flooded)


@contextlib.contextmanager
def _undisturbed() -> Iterator[None]:
    """Put off signals while a process is started: one between its start and its registration would lose it."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    caught: list[int] = []
    # a signal mask would not do: other threads take the signal, and Python handles it here all the same
    before = {
        number: signal.signal(number, lambda number, _frame: caught.append(number))
        for number in (signal.SIGINT, signal.SIGTERM)
    }
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
        if caught:
            signal.raise_signal(caught[0])


def end_all() -> None:
    """End every process that is running, in whatever thread; each run then fails, and nothing has to be waited for."""
    for process in tuple(_running):
        if process.returncode is None:
            with contextlib.suppress(ProcessLookupError, PermissionError):
                os.killpg(process.pid, signal.SIGKILL)


def _scratch(folder: Path) -> IO[bytes]:
    with _writing(folder):
        return tempfile.TemporaryFile(dir=folder)


def _wait(process: subprocess.Popen[bytes], timeout: float, logs: Sequence[IO[bytes]]) -> bool:
    """Wait for the end of a process; False where the time limit or a flood of its log came first."""
    deadline = time.monotonic() + timeout
    while (left := deadline - time.monotonic()) > 0.0:
        if _ended_within(process, min(left, _LOOK)):
            return True
        if any(_size(log) > bounds.LOG_ROOM for log in logs):
            return False
    return _ended_within(process, 0.0)


def _size(log: IO[bytes]) -> int:
    return os.fstat(log.fileno()).st_size


def _ended_within(process: subprocess.Popen[bytes], seconds: float) -> bool:
    try:
        descriptor = os.pidfd_open(process.pid)
    except (AttributeError, OSError):
        # Not on Linux, or a kernel before 5.3: Popen looks now and then, which costs milliseconds.
        try:
            process.wait(seconds)
        except subprocess.TimeoutExpired:
            return False
        return True
    try:
        poller = select.poll()
        poller.register(descriptor, select.POLLIN)
        return bool(poller.poll(seconds * 1e3))
    finally:
        os.close(descriptor)


def _end_group(process: subprocess.Popen[bytes]) -> None:
    """End what is left of the process group, and collect the exit status."""
    # As long as the status is not collected the number of the group cannot belong to another.
    if process.returncode is None:
        with contextlib.suppress(ProcessLookupError, PermissionError):
            os.killpg(process.pid, signal.SIGKILL)
        process.wait()


def _text(stream: IO[bytes]) -> str:
    """Return a log; of one that is too long its head and its tail."""
    size = stream.seek(0, os.SEEK_END)
    stream.seek(0)
    if size <= LOG_LIMIT:
        return stream.read().decode("utf-8", "replace")
    half = LOG_LIMIT // 2
    head = stream.read(half)
    stream.seek(size - half)
    left_out = f"\n... {size - 2 * half} bytes left out ...\n".encode()
    return (head + left_out + stream.read(half)).decode("utf-8", "replace")
