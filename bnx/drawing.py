"""DOT to SVG, PNG or PDF, by whichever Graphviz engine the machine has."""

import importlib.util
import os
import re
import shutil
import subprocess
import sys
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal, get_args

from bnx.errors import EngineError, SettingError
from bnx.svg import themed

__all__ = ["Engine", "Form", "find_engine", "render"]

Form = Literal["svg", "png", "pdf"]

_OPTIONS: Mapping[Form, tuple[str, ...]] = {
    "svg": ("-Tsvg",),
    "png": ("-Tpng", "-Gdpi=144"),
    "pdf": ("-Tpdf",),
}
TIME_LIMIT = 120
"""Seconds one picture may take."""

# Another process keeps the C library's notes off the user's terminal and a crash of it away from the results.
_IN_PIP = (
    "import sys, pygraphviz; "
    "graph = pygraphviz.AGraph(string=sys.stdin.buffer.read().decode()); "
    "drawn = graph.draw(format=sys.argv[1][2:], prog='dot', args=' '.join(sys.argv[2:])); "
    "sys.stdout.buffer.write(drawn)"
)


@dataclass(frozen=True)
class Engine:
    """A drawing engine: what it is, for people, and the command that reads DOT and takes ``-Tsvg`` and the like."""

    name: str
    command: tuple[str, ...]


def find_engine() -> Engine:
    """Find what draws: the program named by ``BNX_DOT``, the engine that pip installs, or ``dot`` on the PATH.

    Raises:
        EngineError: there is none, or ``BNX_DOT`` names no program.
    """
    wanted = os.environ.get("BNX_DOT")
    if wanted:
        program = shutil.which(wanted)
        if program is None:
            raise EngineError(
                f"the environment variable BNX_DOT is {wanted!r}, which is no program; give the path of dot"
            )
        return Engine(f"{program} (BNX_DOT)", (program,))
    if importlib.util.find_spec("pygraphviz") is not None:
        return Engine("pygraphviz", (sys.executable, "-P", "-c", _IN_PIP))
    program = shutil.which("dot")
    if program is None:
        raise EngineError(
            "no drawing engine is here; pip install pygraphviz, or set BNX_DOT to the path of a dot program"
        )
    return Engine(f"{program} (PATH)", (program,))


def render(dot: str, form: Form) -> bytes:
    """Draw DOT text; an SVG serves light and dark pages alike.

    Raises:
        SettingError: the form is unknown.
        EngineError: there is no engine, or it failed.
    """
    if form not in get_args(Form):
        raise SettingError(f"a picture cannot be drawn as {form!r}; known: {', '.join(get_args(Form))}")
    drawn = _run(find_engine(), dot, form)
    if form == "pdf":  # the date of drawing would make equal pictures unequal files
        drawn = re.sub(rb"(/CreationDate \(D:)\d{14}", rb"\g<1>20000101000000", drawn)
    return themed(drawn) if form == "svg" else drawn


def _run(engine: Engine, dot: str, form: Form) -> bytes:
    """Give DOT to an engine; the fixed date makes equal pictures equal files."""
    settings = {"SOURCE_DATE_EPOCH": "0", **os.environ}
    try:
        done = subprocess.run(
            [*engine.command, *_OPTIONS[form]],
            input=dot.encode(),
            capture_output=True,
            check=False,
            env=settings,
            timeout=TIME_LIMIT,
        )
    except subprocess.TimeoutExpired as late:
        raise EngineError(
            f"the drawing engine {engine.name} took over {TIME_LIMIT} seconds; draw fewer arrows"
        ) from late
    except OSError as refused:
        raise EngineError(f"the drawing engine {engine.name} cannot be started: {refused.strerror}") from refused
    if done.returncode or not done.stdout:
        said = done.stderr.decode(errors="replace").strip().splitlines() or [f"exit code {done.returncode}"]
        raise EngineError(f"the drawing engine {engine.name} failed: {said[-1]}")
    return done.stdout
