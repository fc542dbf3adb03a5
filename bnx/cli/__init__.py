"""The command line: one file a command, each loaded only when it is called."""

import gc
import os
import signal
import sys
import time
from importlib import import_module
from typing import Any

import typer
from typer.core import TyperGroup

from bnx import __version__
from bnx.errors import BnxError
from bnx.text import nearest, printable
from bnx.unfinished import undo_all

__all__ = ["BEGAN", "app", "main"]

# What the processor has done until here, it has done alone and at once.
BEGAN = time.perf_counter() - time.process_time()
"""When this process began, by ``time.perf_counter``."""

# Objects made between two searches for unused rings of them. Compiling and very wide tables make millions and hardly a
# ring, and looking for them took a quarter of the time.
_RARELY = 1_000_000

COMMANDS = {
    "learn": "Learn, test, cross-validate and compare structures on a table; the main job.",
    "test": "Test pairs of attributes for independence given the class.",
    "profile": "Say what is in a table: types, levels, blanks, duplicates.",
    "show": "Show a structure: parents, tables, evidence.",
    "draw": "Draw a structure as SVG, PNG, PDF or DOT.",
    "export": "Hand over one structure of a results folder as one file.",
    "classify": "Give class probabilities for new records.",
}


def _new_app(**settings: Any) -> typer.Typer:
    return typer.Typer(rich_markup_mode=None, pretty_exceptions_enable=False, **settings)


class Commands(TyperGroup):
    """Lists all commands without importing what they need."""

    def list_commands(self, ctx: Any) -> list[str]:
        """Name the commands in the order of the job."""
        return list(COMMANDS)

    def get_command(self, ctx: Any, cmd_name: str) -> Any:
        """Load one command: the function ``run`` of the file that has its name."""
        if cmd_name not in COMMANDS:
            if not ctx.resilient_parsing and not cmd_name.startswith("-"):
                ctx.fail(f"there is no command {cmd_name!r}; {nearest(cmd_name, list(COMMANDS))}")
            return None
        one = _new_app(add_completion=False)
        one.command()(import_module(f"bnx.cli.{cmd_name}").run)
        return typer.main.get_command(one)

    def format_commands(self, ctx: Any, formatter: Any) -> None:
        """List the commands with a line each."""
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))


app = _new_app(cls=Commands, invoke_without_command=True)


def _show_version(wanted: bool) -> None:
    if wanted:
        typer.echo(f"bnx {__version__}")
        raise typer.Exit


@app.callback()
def bnx(
    ctx: typer.Context,
    version: bool = typer.Option(False, "--version", callback=_show_version, is_eager=True, help="Show the version."),
) -> None:
    """See where the independence assumption of naive Bayes breaks, whether it matters, and what to model instead."""
    if ctx.invoked_subcommand is None:
        typer.echo(ctx.get_help())


def main() -> None:
    """Run the command line; a refusal becomes one sentence on standard error and exit code 1, or 2 for wrong usage."""
    gc.set_threshold(_RARELY)
    for number in (signal.SIGINT, signal.SIGTERM, getattr(signal, "SIGHUP", signal.SIGTERM)):
        signal.signal(number, _leave)
    try:
        sys.exit(app(prog_name="bnx", standalone_mode=False))
    except BnxError as error:
        _refuse(str(error))
    except typer.TyperException as error:
        _refuse(_usage(error), error.exit_code)
    except MemoryError:
        _refuse(
            "the memory of this machine is not enough for this table; "
            "give fewer columns, --structures or --given, or --spill DIR"
        )
    except OSError as error:
        if not error.filename:
            _let_go_of_output()
        what = f"use {error.filename}" if error.filename else "write the output"
        _refuse(f"cannot {what} ({error.strerror or error}); give another place")


def _leave(number: int, _frame: Any) -> None:
    """Undo what is unfinished and end at once: an exception raised here could be swallowed, with locks left taken."""
    undo_all()
    os._exit(128 + number)


def _refuse(sentence: str, code: int = 1) -> None:
    typer.echo(f"error: {printable(sentence)}", err=True)
    sys.exit(code)


def _usage(error: typer.TyperException) -> str:
    """Put what the parser of options says into a sentence."""
    message = error.format_message().rstrip(".")
    ctx = getattr(error, "ctx", None)
    command = ctx.command_path if ctx else "bnx"
    hint = "" if message.endswith("?") else f"; see {command} --help"
    return f"{message[:1].lower()}{message[1:]}{hint}"


def _let_go_of_output() -> None:
    """Drop what is still to be written, or Python complains about it once more at the very end."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
