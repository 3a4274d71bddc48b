"""Where the files of one run go: a folder of results, one of figures, and a page, each as it is asked for."""

from __future__ import annotations

import contextlib
from pathlib import Path
from types import TracebackType

from transim.errors import OutputError
from transim.report.output import ResultFolder

__all__ = ["Places"]


class Places:
    """The places of one run; figures and page may lie in the folder of results and are then a part of it.

    Used as a context manager: at the end of the block the folders appear with all their files, and after any
    exception nothing does.

    Parameters
    ----------
    out, figures, report : Path or None
        The wanted folder of results, folder of figures, and file of the page.
    force : bool
        Whether files of an earlier run may be replaced.

    Attributes
    ----------
    results, figures, report : Path or None
        Where to write, within the block.
    """

    def __init__(self, out: Path | None, figures: Path | None, report: Path | None, *, force: bool = False) -> None:
        self._out, self._figures, self._report, self._force = out, figures, report, force
        self.results: Path | None = None
        self.figures: Path | None = None
        self.report: Path | None = None
        self._stack = contextlib.ExitStack()

    def check(self) -> None:
        """Refuse what cannot be done, before anything is run.

        Raises
        ------
        OutputError
            If the page cannot be drawn or has no folder, or the results lie in the folder of figures.
        """
        if self._report is not None:
            from transim.report.page import require_page

            require_page()
            if self._report.is_dir():
                raise OutputError(f"--report {self._report}: this is a folder, and a file is wanted")
            if _within(self._report, self._out) is None and not self._report.resolve().parent.is_dir():
                raise OutputError(f"--report {self._report}: there is no folder {self._report.parent}")
        if self._figures is None or self._out is None or _within(self._figures, self._out) is not None:
            return
        if _within(self._out, self._figures) is not None:
            raise OutputError(
                f"--out {self._out} lies in the folder of figures {self._figures}; name a folder beside it, or put"
                " the figures into the results"
            )

    def __enter__(self) -> Places:
        with contextlib.ExitStack() as stack:
            if self._out is not None:
                self.results = stack.enter_context(ResultFolder(self._out, force=self._force))
            if self._figures is not None:
                inner = _within(self._figures, self._out)
                if inner is None or self.results is None:
                    self.figures = stack.enter_context(ResultFolder(self._figures, force=self._force))
                else:
                    self.figures = self.results / inner
            if self._report is not None:
                inner = _within(self._report, self._out)
                self.report = self._report if inner is None or self.results is None else self.results / inner
                if inner is not None:
                    self.report.parent.mkdir(parents=True, exist_ok=True)
            self._stack = stack.pop_all()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._stack.__exit__(kind, error, trace)


def _within(path: Path, folder: Path | None) -> Path | None:
    """Return a path from a folder on; None where it does not lie in it."""
    if folder is None:
        return None
    place, top = path.resolve(), folder.resolve()
    return place.relative_to(top) if place.is_relative_to(top) else None
