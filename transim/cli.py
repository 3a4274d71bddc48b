"""The command line: how the commands and their options are spelled, and what an exit status means.

Only this module imports click. What a command needs is imported when it is called, so that help and errors
come at once.
"""

from __future__ import annotations

import contextlib
import functools
import io
import itertools
import signal
import sys
import threading
import traceback
from collections.abc import Callable, Iterator, Sequence
from pathlib import Path
from typing import Any, NoReturn

import click

from transim import __version__
from transim.errors import DesignError, TransimError

__all__ = ["main"]

#: Exit status after a signal, 128 and its number.
_ENDINGS = {130: "interrupted", 143: "terminated"}
_PATH = click.Path(path_type=Path)
_Command = Callable[..., int]


class _Commands(click.Group):
    """A group that answers an unknown command with the nearest one."""

    def resolve_command(self, ctx: click.Context, args: list[str]) -> Any:
        from transim.parts.nearest import nearest_name

        if args and self.get_command(ctx, args[0]) is None and not args[0].startswith("-"):
            nearest = nearest_name(args[0], self.commands)
            raise click.UsageError(
                f"there is no command {args[0]}" + (f"; did you mean {nearest}?" if nearest else ""), ctx
            )
        return super().resolve_command(ctx, args)


@click.group(
    cls=_Commands,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
    epilog="Exit status: 0 all limits met; 1 a limit missed; 2 bad command line, design file or netlist; 3 ngspice"
    " missing or failed; 4 a limited metric is undefined; 130, 143 interrupted, terminated.",
)
@click.version_option(__version__, message="transim %(version)s")
def _transim() -> None:
    """Switching transients of solid-state RF switches and their drivers.

    Reads a design file (TOML), runs it on ngspice, and judges switching times, video leakage and driver
    currents against the limits in it.
    """


def _common(command: _Command) -> Callable[..., int]:
    """Add the options that every command has."""

    @click.option("--json", metavar="FILE|-", help="Write a JSON document too; - prints it in place of the text.")
    @click.option("--color", type=click.Choice(["auto", "always", "never"]), default="auto", show_default=True)
    @click.option("--debug", is_flag=True, expose_value=False, help="Show the traceback of an error.")
    @functools.wraps(command)
    def wrapped(json: str | None, color: str, **arguments: Any) -> int:
        from transim.commands.console import Console

        console = Console(json, color)
        console.check()
        return command(console, **arguments)

    return wrapped


_design = click.argument("design", type=_PATH)
_force = click.option("--force", is_flag=True, help="Replace what an earlier call wrote; other files stay.")
_ngspice = click.option(
    "--ngspice", metavar="PATH", help="The ngspice to use; else that of TRANSIM_NGSPICE, else the one on PATH."
)
_drivers = click.option(
    "--driver", "drivers", metavar="NAME", multiple=True, help="Only this driver of the design; may be repeated."
)


@_transim.command("new", short_help="Write a starting design file.")
@click.argument("file")
@click.option("--path", metavar="NAME", default="series_pair", show_default=True, help="A path part.")
@click.option("--driver", metavar="NAME", default="push_pull_speedup", show_default=True, help="A driver part.")
@click.option("--force", is_flag=True, help="Replace FILE if it exists.")
@_common
def _new(console: Any, file: str, path: str, driver: str, force: bool) -> int:
    """Write a starting design FILE (- for standard output): every key, its default and its meaning."""
    from transim.commands.new import new_design

    return new_design(console, file, path, driver, force=force)


@_transim.command("check", short_help="Read a design and describe its circuit, without running.")
@_design
@_common
def _check(console: Any, design: Path) -> int:
    """Read DESIGN and say what circuit it makes, without running it."""
    from transim.commands.check import check_design

    return check_design(console, design)


@_transim.command("parts", short_help="List the part files, or describe one.")
@click.argument("name", required=False)
@click.option("--folder", type=_PATH, metavar="DIR", help="Part files of your own, beside these.")
@_common
def _parts(console: Any, name: str | None, folder: Path | None) -> int:
    """List the part files, or describe the part NAME with all its parameters."""
    from transim.commands.parts import show_parts

    return show_parts(console, name, folder)


@_transim.command("deck", short_help="Write the decks of a design.")
@_design
@click.option("--out", type=_PATH, required=True, metavar="DIR", help="Folder for the decks.")
@_drivers
@_force
@_common
def _deck(console: Any, design: Path, out: Path, drivers: Sequence[str], force: bool) -> int:
    """Write every deck of DESIGN, one folder a driver; each runs in plain ngspice by itself."""
    from transim.commands.deck import write_design_decks

    return write_design_decks(console, design, out, drivers, force=force)


@_transim.command("run", short_help="Simulate the drivers of a design and judge them.")
@_design
@click.option(
    "--analysis",
    type=click.Choice(["envelope", "carrier", "both"]),
    default="envelope",
    show_default=True,
    help="envelope: small signal, fast; carrier: the RF resolved at its real level, slow.",
)
@_drivers
@click.option("--out", type=_PATH, metavar="DIR", help="Folder for result.json, decks and waveforms.")
@click.option("--figures", type=_PATH, metavar="DIR", help="Folder for figures, PNG and SVG; may lie in --out.")
@click.option("--report", type=_PATH, metavar="FILE.html", help="A page with everything that opens offline.")
@_force
@click.option("--certify", is_flag=True, help="Repeat at finer settings; give every figure its numerical uncertainty.")
@click.option("--beside", metavar="[DRIVER=]FILE", help="A record to compare with, as measure --json wrote it.")
@click.option("--shortest", is_flag=True, help="Find the shortest usable pulse and gap too, by bisection.")
@_ngspice
@_common
def _run(console: Any, design: Path, **options: Any) -> int:
    """Simulate the drivers of DESIGN at all its carriers and temperatures, and judge them side by side."""
    from transim.commands.run import RunRequest, run_and_report

    return run_and_report(console, RunRequest(design, **options))


@_transim.command("measure", short_help="Measure an oscilloscope record.")
@click.argument("file", type=_PATH)
@click.option("--command", metavar="COLUMN", required=True, help="Column of the logic command, by name or number.")
@click.option("--rf", metavar="COLUMN", help="Column of the RF, or of its detector.")
@click.option("--leakage", metavar="[PORT=]COLUMN", multiple=True, help="Column of a port's leakage, RF off.")
@click.option("--time", metavar="COLUMN", help="Column of time, where its name or unit does not say so.")
@click.option("--interval", metavar="TIME", help='Time between two rows, such as "2 ns", where no column has it.')
@click.option(
    "--detector",
    type=click.Choice(["carrier", "linear", "square", "log"]),
    default="carrier",
    show_default=True,
    help="What the RF column is: the RF itself, or a detector's output.",
)
@click.option("--slope", metavar="VOLTS", help='Of a logarithmic detector, per dB, such as "25 mV" or "-20 mV".')
@click.option("--zero", metavar="VOLTS", help="Output of a linear or square-law detector without RF; 0 V if not given.")
@click.option("--through", metavar="VOLTS", help="What the RF column reads with a straight connection (peak volts).")
@click.option("--carrier", metavar="FREQUENCY", help="Of the RF; found in the record of a carrier if not given.")
@click.option("--impedance", metavar="OHMS", help="That leakage is measured across; 50 ohm if not given.")
@click.option("--period", metavar="TIME", help="From one pulse to the next, where the record has one pulse.")
@click.option("--passes", type=click.Choice(["high", "low"]), help="Command while RF passes; else as the RF shows.")
@click.option("--pulse", type=click.IntRange(1), metavar="N", help="Which pulse is measured; else the last whole one.")
@click.option("--design", "design_file", type=_PATH, metavar="FILE", help="Design with definitions and limits.")
@_common
def _measure(console: Any, **options: Any) -> int:
    """Take the figures of a run from FILE, separated text as oscilloscopes write it, each with its uncertainty."""
    from transim.commands.measure import MeasureRequest, measure_record

    return measure_record(console, MeasureRequest(**options))


@_transim.command("fit", short_help="Fit junction parameters to measurements.")
@_design
@click.option("--record", "records", metavar="[DRIVER=]FILE", multiple=True, help="As measure --json wrote it.")
@click.option("--storage", type=_PATH, metavar="FILE", help="Table of currents and storage time.")
@click.option("--loss", type=_PATH, metavar="FILE", help="Table of forward current and loss of one series junction.")
@click.option("--isolation", type=_PATH, metavar="FILE", help="Table of frequency, isolation of one series junction.")
@click.option("--junction", metavar="NAME", help="Which junction of the design, where it has several.")
@click.option("--parameter", "parameters", metavar="NAME", multiple=True, help="What is fitted; repeatable.")
@click.option("--figures", type=_PATH, metavar="DIR", help="Folder for a figure of the residuals, PNG and SVG.")
@_ngspice
@_common
def _fit(console: Any, design: Path, **options: Any) -> int:
    """Fit parameters of a junction of DESIGN to measured records, or to tables of single measurements."""
    from transim.commands.fit import FitRequest, fit_and_report

    return fit_and_report(console, FitRequest(design, **options))


def _study(command: _Command) -> _Command:
    """Add what every study is asked for."""
    options = (
        click.option(
            "--vary",
            metavar="TEXT",
            multiple=True,
            help="A parameter in place of those in DESIGN, for example"
            ' "driver.fast.speedup_cap = 100 pF .. 10 nF, E24"; may be repeated.',
        ),
        click.option(
            "--analysis", type=click.Choice(["envelope", "carrier"]), default="envelope", show_default=True
        ),
        click.option("--workers", type=click.IntRange(1, 1024), metavar="N", help="Processes; else one a processor."),
        click.option("--cluster", metavar="ADDRESS", help="A Dask scheduler whose workers simulate the points."),
        click.option("--out", type=_PATH, metavar="DIR", help="Folder of the study; else named after DESIGN."),
        click.option("--figures", type=_PATH, metavar="DIR", help="Folder for figures, PNG and SVG."),
        click.option("--resume", is_flag=True, help="Go on with a study, and fail where there is none."),
        click.option("--force", is_flag=True, help="Discard another study in the folder."),
        _drivers,
        _ngspice,
        _design,
    )
    return functools.reduce(lambda decorated, option: option(decorated), options, command)


_seed = click.option("--seed", type=click.IntRange(0, 2**31 - 1), metavar="N", help="In place of DESIGN's.")


def _study_request(design: Path, **options: Any) -> Any:
    from transim.commands.studying import StudyRequest

    return StudyRequest(design, **options)


@_transim.command("sweep", short_help="Step one or two parameters through a range.")
@_study
@_common
def _sweep(console: Any, **options: Any) -> int:
    """Step the parameters of [sweep] in DESIGN through their values, and show where all limits hold.

    A sweep that was interrupted goes on where it stopped.
    """
    from transim.commands.sweep import sweep_and_report

    return sweep_and_report(console, _study_request(**options))


@_transim.command("tune", short_help="Choose preferred values so that all limits hold with margin.")
@click.option("--goal", metavar="TEXT", help='"largest margin", or for example "smallest on_time".')
@click.option("--runs", type=click.IntRange(1, 100_000), metavar="N", help="Most points that are simulated.")
@_seed
@_study
@_common
def _tune(console: Any, goal: str | None, runs: int | None, seed: int | None, **options: Any) -> int:
    """Find the best preferred values of the parameters of [tune] in DESIGN, and how far each may move.

    A search that was interrupted goes on where it stopped.
    """
    from transim.commands.tune import tune_and_report

    return tune_and_report(console, _study_request(**options), goal, runs, seed)


@_transim.command("spread", short_help="Yield, worst case and its causes within tolerances.")
@click.option("--trials", type=click.IntRange(1, 1_000_000), metavar="N", help="In place of DESIGN's.")
@click.option("--points", type=click.Choice(["random", "sobol", "corners"]), help="In place of DESIGN's.")
@_seed
@_study
@_common
def _spread(console: Any, trials: int | None, points: str | None, seed: int | None, **options: Any) -> int:
    """Simulate trials within the tolerances of [spread] in DESIGN: yield, distributions, worst trial, causes.

    A spread that was interrupted goes on where it stopped; more trials are added to the ones that are there.
    """
    from transim.commands.spread import spread_and_report

    return spread_and_report(console, _study_request(**options), trials, points, seed)


@_transim.command("engine", short_help="Say which ngspice is used, and test it.")
@_ngspice
@_common
def _engine(console: Any, ngspice: str | None) -> int:
    """Say which ngspice is used and where it was looked for, and test it."""
    from transim.commands.engine import show_engine

    return show_engine(console, ngspice)


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command.

    Parameters
    ----------
    arguments : sequence of str or None
        Words after the program's name; None: those of the process.

    Returns
    -------
    int
        Exit status.
    """
    words = list(sys.argv[1:] if arguments is None else arguments)
    for stream in (sys.stdout, sys.stderr):
        # a title may hold letters that the terminal's encoding has not
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="backslashreplace")
    with _orderly_end():
        try:
            status = _transim.main(words, prog_name="transim", standalone_mode=False)
        except TransimError as error:
            return _fail(error, words)
        except click.exceptions.NoArgsIsHelpError as error:
            sys.stderr.write(f"{error.format_message()}\n")
            return error.exit_code
        except click.UsageError as error:
            return _fail(_usage(error), words)
        except SystemExit as leaving:
            status = leaving.code if isinstance(leaving.code, int) else 1
            if status in _ENDINGS:
                return _fail(_ended(status), words)
        except Exception as error:  # noqa: BLE001 - the last resort: no traceback unless it is asked for
            text = f"{type(error).__name__}: {error}".splitlines()[0]
            return _fail(TransimError(f"unexpected {text}; run again with --debug to see where"), words)
        return status if isinstance(status, int) else 0


def _ended(status: int) -> TransimError:
    error = TransimError(_ENDINGS[status])
    error.exit_code = status
    return error


def _usage(error: click.UsageError) -> DesignError:
    path = error.ctx.command_path if error.ctx is not None else "transim"
    message = error.format_message().rstrip(".")
    return DesignError(f"{message[:1].lower()}{message[1:]} ({path} --help says what there is)")


def _fail(error: TransimError, words: Sequence[str]) -> int:
    """Report an error on standard error, and as the document where one is wanted."""
    if "--debug" in words:
        traceback.print_exc()
    single = getattr(error, "errors", (error,))
    sys.stderr.write("".join(f"error: {one}\n" for one in single))
    target = _value_of("--json", words)
    if target is not None:
        from transim.commands.console import Console
        from transim.report.document import error_document

        with contextlib.suppress(TransimError):
            Console(target).document(error_document(error))
    return error.exit_code


def _value_of(option: str, words: Sequence[str]) -> str | None:
    """Find an option's value where the command line could not be read."""
    for word, following in itertools.zip_longest(words, words[1:]):
        if word == "--":
            return None
        if word == option:
            return following
        if word.startswith(f"{option}="):
            return word.partition("=")[2]
    return None


@contextlib.contextmanager
def _orderly_end() -> Iterator[None]:
    """Let Ctrl-C and a request to terminate unwind the program: what was started is ended, nothing half stays."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return

    def leave(number: int, _frame: object) -> NoReturn:
        # runs in other threads would have to be waited for; without the engine there are none
        engine = sys.modules.get("transim.engine.ngspice")
        if engine is not None:
            engine.end_all()
        # not KeyboardInterrupt: raised inside exec(), it ends Python by the signal even where it is caught
        raise SystemExit(128 + number)

    before = {number: signal.signal(number, leave) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
