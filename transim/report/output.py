"""A folder of results: written beside its place, moved in whole, and never over what is not transim's own."""

from __future__ import annotations

import contextlib
import errno
import fcntl
import os
import re
import shutil
import signal
import tempfile
import threading
from collections.abc import Iterable, Iterator
from pathlib import Path, PurePosixPath
from types import TracebackType
from typing import IO

from transim.errors import OutputError

__all__ = ["LISTING", "ResultFolder", "write_file"]

#: Lists every file of a result folder, so that a later run knows which ones it may replace.
LISTING = "files.txt"
#: What the system says where a disk, a quota or a file's size is at its end, or the disk cannot be written.
_NO_ROOM = (errno.ENOSPC, errno.EDQUOT, errno.EFBIG, errno.EROFS, errno.EIO)


class ResultFolder:
    """A folder that appears with all its files, or not at all.

    Used as a context manager: it gives the folder to write into, a hidden sibling of the wanted one. At the
    end of the block its files are moved into place; after any exception it is removed, and what was there
    before is untouched.

    Parameters
    ----------
    path : Path
        The wanted folder; missing parents are made.
    force : bool
        Whether files of an earlier run may be replaced.

    Raises
    ------
    OutputError
        On entry where the folder is not empty and `force` is not set, cannot be written, or is just being written by
        another run. At the end where a file in it that transim did not write stands in the way, or the disk is full.
    """

    def __init__(self, path: Path, *, force: bool = False) -> None:
        self.path = path
        self._force = force
        self._temporary: Path | None = None
        self._lock: IO[bytes] | None = None

    def __enter__(self) -> Path:
        with _writing(self.path):
            # a link to a folder stays a link: what it leads to is the folder that is meant
            self._place = self.path.resolve()
            if self._place.exists() and not self._place.is_dir():
                raise OutputError(f"{self.path} is a file, and a folder is wanted for the results")
            self._occupied = self._place.is_dir() and any(self._place.iterdir())
            if self._occupied and not self._force:
                raise OutputError(
                    f"the folder {self.path} is not empty; name another one, or add --force to replace the"
                    " results of an earlier run in it (other files stay)"
                )
            self._place.parent.mkdir(parents=True, exist_ok=True)
            if self._place.is_dir() and not os.access(self._place, os.W_OK | os.X_OK):
                raise OutputError(f"the folder {self.path} cannot be written: permission denied")
            self._lock = self._locked()
            try:
                self._temporary = Path(
                    tempfile.mkdtemp(prefix=f".{self._place.name}.", suffix=".transim", dir=self._place.parent)
                )
                # mkdtemp gives access to the owner alone; a result is as readable as any new folder
                self._temporary.chmod(0o777 & ~_umask())
            except BaseException:
                self._unlock()
                raise
        return self._temporary

    def _locked(self) -> IO[bytes]:
        """Take the folder for this run; what a killed run has left beside it is removed."""
        file = self._place.parent / f".{self._place.name}.lock.transim"
        while True:
            stream = file.open("ab")
            try:
                # the system gives it back however this process ends
                fcntl.flock(stream, fcntl.LOCK_EX | fcntl.LOCK_NB)
            except BlockingIOError:
                stream.close()
                raise OutputError(
                    f"another run is just writing into {self.path}; wait for its end, or name another folder"
                ) from None
            # another run may have removed the file between its opening and its locking
            if file.exists() and file.stat().st_ino == os.fstat(stream.fileno()).st_ino:
                break
            stream.close()
        left = re.compile(rf"\.{re.escape(self._place.name)}\.[a-z0-9_]{{8}}\.transim")
        for folder in self._place.parent.iterdir():
            if left.fullmatch(folder.name) and folder.is_dir() and not folder.is_symlink():
                shutil.rmtree(folder, ignore_errors=True)
        return stream

    def _unlock(self) -> None:
        if self._lock is not None:
            with contextlib.suppress(OSError):
                Path(self._lock.name).unlink(missing_ok=True)
            self._lock.close()
            self._lock = None

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        temporary = self._temporary
        if temporary is None:
            return
        try:
            if error is None:
                with _writing(self.path):
                    self._move(temporary)
        finally:
            shutil.rmtree(temporary, ignore_errors=True)
            self._unlock()
        if isinstance(error, OSError) and error.errno in _NO_ROOM:
            raise OutputError(f"{self.path} cannot be written: {error.strerror}; nothing was left behind") from error

    def _move(self, temporary: Path) -> None:
        new = sorted(
            file.relative_to(temporary).as_posix() for file in temporary.rglob("*") if file.is_file()
        )
        new.append(LISTING)
        (temporary / LISTING).write_text("".join(f"{name}\n" for name in new), encoding="utf-8")
        if not self._occupied:
            # replaces an empty folder in one step; one that has been filled meanwhile is refused
            temporary.rename(self._place)
            return
        old = _listed(self._place)
        for name in new:
            obstacle = _obstacle(self._place, name, old)
            if obstacle is not None:
                raise OutputError(
                    f"{self.path / obstacle} is in the way and was not written by transim; move it, or name"
                    " another folder"
                )
        with _undisturbed():
            # whatever stops this half-way, the next run still knows every file as transim's own
            both = "".join(f"{name}\n" for name in sorted({*new, *old}))
            write_file(self._place / LISTING, both)
            for name in new:
                target = self._place / name
                target.parent.mkdir(parents=True, exist_ok=True)
                (temporary / name).replace(target)
            for name in sorted(old - set(new)):
                (self._place / name).unlink(missing_ok=True)
            emptied = {parent for name in old for parent in PurePosixPath(name).parents} - {PurePosixPath()}
            for parent in sorted(emptied, reverse=True):
                with contextlib.suppress(OSError):
                    (self._place / parent).rmdir()


def write_file(path: Path, text: str) -> None:
    """Write a text file whole: an interruption leaves the old one or the new one.

    Parameters
    ----------
    path : Path
        The file; replaced if it exists.
    text : str
        Its content.

    Raises
    ------
    OutputError
        If it cannot be written.
    """
    with _writing(path):
        if path.is_dir():
            raise OutputError(f"{path} is a folder, and a file is wanted")
        if path.exists() and not path.is_file():
            # a device or a pipe cannot be replaced by a file
            path.write_text(text, encoding="utf-8")
            return
        place = path.resolve()
        if not place.parent.is_dir():
            raise OutputError(f"{path} cannot be written: there is no folder {place.parent}")
        handle, name = tempfile.mkstemp(prefix=f".{place.name}.", suffix=".transim", dir=place.parent)
        temporary = Path(name)
        try:
            with os.fdopen(handle, "w", encoding="utf-8", newline="\n") as stream:
                stream.write(text)
            temporary.chmod(place.stat().st_mode & 0o777 if place.exists() else 0o666 & ~_umask())
            temporary.replace(place)
        finally:
            temporary.unlink(missing_ok=True)


def _obstacle(folder: Path, name: str, own: set[str]) -> str | None:
    """Return what a file cannot replace: one that is not transim's own, a folder, or a file as its folder."""
    target = folder / name
    if target.is_dir() or (os.path.lexists(target) and name not in own):
        return name
    for parent in PurePosixPath(name).parents:
        place = folder / parent
        if os.path.lexists(place) and not place.is_dir():
            return str(parent)
    return None


def _listed(folder: Path) -> set[str]:
    """Return the files that an earlier run wrote into a folder; nothing that leads out of it."""
    try:
        lines: Iterable[str] = (folder / LISTING).read_text(encoding="utf-8").splitlines()
    except FileNotFoundError:
        return set()
    except UnicodeDecodeError as exc:
        raise OutputError(f"{folder / LISTING} is not transim's list of files; move it away") from exc
    names = (PurePosixPath(line) for line in lines if line)
    return {str(name) for name in names if not name.is_absolute() and ".." not in name.parts}


@contextlib.contextmanager
def _undisturbed() -> Iterator[None]:
    """Put off Ctrl-C and the request to terminate for the milliseconds in which files change places."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    caught: list[int] = []
    # a signal mask would not do: numpy's own threads take the signal, and Python handles it here all the same
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


@contextlib.contextmanager
def _writing(path: Path) -> Iterator[None]:
    try:
        yield
    except OSError as exc:
        raise OutputError(f"{path} cannot be written: {exc.strerror or exc}") from exc


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
