"""The command line: registers commands and turns errors into exit codes.

Exit codes: 0 an answer; 1 no design exists, or a judged design fails; 2 a fault in the input or
the call; 3 stopped before proof; 70 a fault of this program.
"""

from __future__ import annotations

import os
import sys
from pathlib import Path
from typing import Annotated, Any

import typer

from . import __version__
from .errors import InputFaults, SelectorError

app = typer.Typer(
    add_completion=False,
    context_settings={"help_option_names": ["-h", "--help"]},
    no_args_is_help=True,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    help="Choose motors, drivers, settings, bus voltage and supply for the axes of a machine.",
)
# Files are opened by the loaders, not tried by typer before: theirs are the better messages.
Json = Annotated[bool, typer.Option("--json", help="Print one JSON object instead of text.")]


def _version(wanted: bool) -> None:
    if wanted:
        print(f"selector {__version__}")
        raise typer.Exit


@app.callback()
def options(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version.")
    ] = False,
) -> None:
    """Choose motors, drivers, settings, bus voltage and supply for the axes of a machine."""


@app.command()
def pick(
    machine: Annotated[
        Path, typer.Argument(metavar="MACHINE", readable=False, help="A machine file (YAML).")
    ],
    save: Annotated[
        Path | None, typer.Option(readable=False, help="Keep the design in this file, for judge.")
    ] = None,
    as_json: Json = False,
    seconds: Annotated[
        float | None,
        typer.Option(min=0.0, help="Stop after so long and give the best design so far."),
    ] = None,
) -> None:
    """Choose the parts of MACHINE, with proof."""
    from .commands.pick import run

    raise typer.Exit(run(machine, save, as_json, seconds))


@app.command()
def judge(
    design: Annotated[
        Path,
        typer.Argument(
            metavar="DESIGN", readable=False, help="A design kept by pick, or written by hand."
        ),
    ],
    as_json: Json = False,
) -> None:
    """Recompute DESIGN and check every rule, without the search."""
    from .commands.judge import run

    raise typer.Exit(run(design, as_json))


@app.command()
def catalogue(
    path: Annotated[
        Path,
        typer.Argument(
            metavar="PATH", readable=False, help="A catalogue file, or a folder of them."
        ),
    ],
    as_json: Json = False,
) -> None:
    """Check and list the parts in PATH."""
    from .commands.catalogue import run

    raise typer.Exit(run(path, as_json))


def main() -> None:
    """Run the command line and leave with its exit code."""
    for name in ("stdout", "stderr"):
        stream = getattr(sys, name)
        if stream is None:  # closed by the caller
            setattr(sys, name, open(os.devnull, "w"))  # noqa: SIM115, PTH123 - open until the end
        else:  # a name that the terminal's encoding lacks must not end the run
            stream.reconfigure(errors="backslashreplace")
    sys.exit(run_app(sys.argv[1:]))


# Typer stands on click or on a copy of it; the error of a wrong call is found from one of its kind.
_WrongCall: Any = typer.BadParameter.__base__
_INTERRUPTED = 130  # what typer makes of Ctrl-C


def run_app(arguments: list[str]) -> int:
    """Run one command; returns the exit code."""
    try:
        code = int(app(arguments, prog_name="selector", standalone_mode=False) or 0)
        sys.stdout.flush()
    except _WrongCall as error:
        error.show()
        return 2
    except InputFaults as error:
        from .reports.terminal import print_faults

        print_faults(error.faults, sys.stderr)
        return error.exit_code
    except (KeyboardInterrupt, typer.Abort):
        code = _INTERRUPTED
    except (BrokenPipeError, SystemExit):  # typer makes the second of the first
        _drop_output()
        return 0
    except SelectorError as error:
        print(f"{error.name}: {error}", file=sys.stderr)
        return error.exit_code
    except Exception as error:
        if isinstance(error, OSError) and error.filename is None:
            _drop_output()
            print(f"the answer could not be written: {error.strerror}", file=sys.stderr)
            return 2
        import traceback

        traceback.print_exc()
        print("this is a fault of selector, not of your files: please report it", file=sys.stderr)
        return 70
    if code == _INTERRUPTED:
        print("stopped; nothing was written", file=sys.stderr)
        return 3
    return code


def _drop_output() -> None:
    """Send what is left in the buffer nowhere, or leaving would try to write it again."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


if __name__ == "__main__":
    main()
