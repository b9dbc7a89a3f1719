"""The commands, and the one place where errors become exit codes."""

from __future__ import annotations

import os
import signal
import sys
from typing import Annotated, Protocol, runtime_checkable

import typer

from bandcairn.cli import check, demo, new, plan, prune, run
from bandcairn.cli.console import DONE, FAULT, INTERRUPTED, STUDY_AT_FAULT, print_error, say
from bandcairn.errors import BandcairnError, DamagedNodeError, EngineError

app = typer.Typer(
    name="bandcairn",
    help="From EEG, ECG and surface EMG recordings to the feature table and the group statistics of a paper.\n\n"
    "For research use only: no result is a diagnosis.",
    epilog="Start with: bandcairn demo",
    no_args_is_help=True,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    add_completion=True,
)
for module in (demo, new, check, plan, run, prune):
    module.register(app)


def _print_version(asked: bool) -> None:  # noqa: FBT001 - the shape of a callback
    if asked:
        from importlib.metadata import version

        say(f"bandcairn {version('bandcairn')}")
        raise typer.Exit


@app.callback()
def _options(
    *,
    version: Annotated[
        bool,
        typer.Option(
            "--version", callback=_print_version, is_eager=True, help="Print the version and leave."
        ),
    ] = False,
) -> None:
    pass


def run_app() -> None:
    """Run the command line and leave with its exit code."""
    # Whoever asks the program to end, such as a scheduler at the end of its time, interrupts it too.
    signal.signal(signal.SIGTERM, signal.default_int_handler)
    sys.exit(exit_code_of(sys.argv[1:]))


def exit_code_of(arguments: list[str]) -> int:
    """Run one command and return its exit code: 0 done, 2 study at fault, 3 some failed, 70 our fault, 130 interrupted.

    Parameters
    ----------
    arguments : list of str
        What stands after the name of the program.
    """
    try:
        return _run_command(arguments)
    except (BrokenPipeError, SystemExit):  # whoever read the output, such as `head`, has had enough
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return DONE
    except (Exception, KeyboardInterrupt) as error:  # noqa: BLE001 - a user meets a sentence, whatever went wrong
        if isinstance(error, _UsageFault):
            error.show()
            return STUDY_AT_FAULT
        code, told = _verdict(error)
        print_error(told, as_json="--json" in arguments)
        return code


def _run_command(arguments: list[str]) -> int:
    code = app(arguments, standalone_mode=False)
    if code == INTERRUPTED:  # what the framework makes of an interrupt
        raise KeyboardInterrupt
    return code if isinstance(code, int) else DONE


@runtime_checkable
class _UsageFault(Protocol):
    """A command line that cannot be understood. Known by its shape: its class has no public name in all versions."""

    exit_code: int

    def show(self) -> None:
        """Print what is wrong with the command line."""


def _verdict(error: BaseException) -> tuple[int, Exception | str]:
    """Return the exit code of an error, and what to say of it."""
    if isinstance(error, (KeyboardInterrupt, typer.Abort)):
        return INTERRUPTED, "interrupted; what was computed is kept: run again to go on"
    if isinstance(error, (EngineError, DamagedNodeError)):
        return FAULT, error
    if isinstance(error, BandcairnError):
        return STUDY_AT_FAULT, error
    if isinstance(error, OSError) and error.filename is not None:
        return (
            STUDY_AT_FAULT,
            f"{error.filename}: {error.strerror}. Check the path, its permissions and the disk.",
        )
    return FAULT, fault_sentence(error)


def fault_sentence(error: BaseException) -> str:
    """Return what to say of a fault of bandcairn itself, with the place of the code."""
    import traceback

    place = traceback.extract_tb(error.__traceback__)[-1]
    where = f"{os.path.basename(place.filename)}, line {place.lineno}"  # noqa: PTH119 - a name only, no path
    return f"a fault of bandcairn: {type(error).__name__}: {error} ({where}). Please report it."
