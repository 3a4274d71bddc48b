"""Where a command's text, document and progress go."""

from __future__ import annotations

import contextlib
import os
import sys
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, NoReturn, TextIO

from transim.errors import OutputError
from transim.report.document import json_text
from transim.report.output import write_file

__all__ = ["BROKEN_PIPE", "Console"]

#: Exit status where the reader of the output has gone: 128 and the number of SIGPIPE, as for any filter.
BROKEN_PIPE = 141
_STYLES = {
    r"\bPASS\b": "bold green",
    r"\bFAIL\b": "bold red",
    r"\bUNDEFINED\b": "bold yellow",
    r"^(fault|error)\b": "bold red",
}


@dataclass(frozen=True)
class Console:
    """The two output streams of a command.

    Parameters
    ----------
    json : str or None
        Where the document goes: a file, ``-`` for standard output in place of the text, None for nowhere.
    color : {"auto", "always", "never"}
        ``auto`` colours on a terminal, unless NO_COLOR is set or TERM is dumb.
    """

    json: str | None = None
    color: str = "auto"

    def check(self) -> None:
        """Refuse a place for the document that cannot be written, before any work is done.

        Raises
        ------
        OutputError
            If its folder does not exist.
        """
        if self.json not in (None, "-"):
            file = Path(str(self.json))
            if file.is_dir():
                raise OutputError(f"--json {file}: this is a folder, and a file is wanted")
            if not file.parent.is_dir():
                raise OutputError(f"--json {file}: there is no folder {file.parent}")

    def write(self, lines: Iterable[str]) -> None:
        """Write lines of text, unless the document takes their place.

        Parameters
        ----------
        lines : iterable of str
            Without line feeds.
        """
        if self.json == "-":
            return
        if not self.colored(sys.stdout):
            _put("".join(f"{line}\n" for line in lines))
            return
        from rich.console import Console as Terminal
        from rich.text import Text

        terminal = Terminal(file=sys.stdout, force_terminal=True, color_system="standard", legacy_windows=False)
        for line in lines:
            text = Text(line)
            for pattern, style in _STYLES.items():
                text.highlight_regex(pattern, style)
            with _open_pipe():
                terminal.print(text, soft_wrap=True)

    def document(self, document: Mapping[str, Any]) -> None:
        """Write the document where it is wanted.

        Parameters
        ----------
        document : mapping
            What JSON has.

        Raises
        ------
        OutputError
            If its file cannot be written.
        """
        if self.json == "-":
            _put(json_text(document))
        elif self.json is not None:
            write_file(Path(self.json), json_text(document))

    def colored(self, stream: TextIO) -> bool:
        """Tell whether a stream gets colours.

        Parameters
        ----------
        stream : text stream
            Standard output or standard error.

        Returns
        -------
        bool
            True where it does.
        """
        if self.color != "auto":
            return self.color == "always"
        return stream.isatty() and not os.environ.get("NO_COLOR") and os.environ.get("TERM") != "dumb"

    @contextlib.contextmanager
    def progress(self) -> Iterator[Callable[[int, int, str], None] | None]:
        """Show what is being done, on standard error and only on a terminal.

        Yields
        ------
        callable or None
            Takes the number done, their total and what comes next; None where nobody is looking.
        """
        if not sys.stderr.isatty() or os.environ.get("TERM") == "dumb":
            yield None
            return
        from rich.console import Console as Terminal

        terminal = Terminal(stderr=True, no_color=not self.colored(sys.stderr))
        with terminal.status("starting") as status:

            def show(done: int, total: int, text: str) -> None:
                status.update(f"{done} of {total} done{f'; running {text}' if text else ''}")

            yield show


def _put(text: str) -> None:
    with _open_pipe():
        sys.stdout.write(text)
        sys.stdout.flush()


@contextlib.contextmanager
def _open_pipe() -> Iterator[None]:
    try:
        yield
    except BrokenPipeError:
        _leave()


def _leave() -> NoReturn:
    """End quietly; what is still buffered has no reader, and must not be flushed at exit."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
    raise SystemExit(BROKEN_PIPE) from None
