"""How a command ends: its exit code, and errors as plain sentences instead of tracebacks."""

from __future__ import annotations

import os
import signal
import sys
from importlib import metadata
from typing import Any, NoReturn

import typer

from .figures import visible

FAILED = 1
"""The run, or the verification, failed."""
WRONG_INPUT = 2
"""What was typed, or the input, is wrong."""
INTERRUPTED = 130
"""Ctrl-C, or a polite request to end."""

_OURS = {"assumptions", "portfolios", "projection", "reports"}


def run_app(app: typer.Typer, arguments: list[str]) -> int:
    """Run an app with these arguments; return the exit code. Unexpected errors pass through."""
    if arguments == ["--version"]:
        print(f"duecourse {_version()}")
        return 0
    try:
        result = _invoke(app, arguments)
    except KeyboardInterrupt:
        result = INTERRUPTED
    except BrokenPipeError:
        # The reader of our output has gone; closing quietly is what it expects.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return FAILED
    except (ValueError, OSError, MemoryError) as error:
        code = _exit_code(error)
        if code is None:
            raise
        _say(str(error) or "There is not enough memory.")
        return code
    except Exception as error:
        return _usage(error)
    # Typer takes an interrupt for itself and only hands on its exit code.
    if result == INTERRUPTED:
        _say("Interrupted; nothing was left behind.")
    return result if isinstance(result, int) else 0


def end_politely() -> None:
    """Let a batch system's request to end clean up as Ctrl-C does."""
    signal.signal(signal.SIGTERM, _interrupt)


def _invoke(app: typer.Typer, arguments: list[str]) -> Any:
    # Typer's groups import pydantic before they reach the command; its help need not wait for that.
    commands = getattr(typer.main.get_command(app), "commands", {})
    if arguments and arguments[0] in commands:
        name = f"duecourse {arguments[0]}"
        return commands[arguments[0]].main(args=arguments[1:], prog_name=name, standalone_mode=False)
    return app(args=arguments, prog_name="duecourse", standalone_mode=False)


def _usage(error: Exception) -> int:
    """Show an error of the command line itself."""
    show, code = getattr(error, "show", None), getattr(error, "exit_code", None)
    if code is None:
        raise error
    if show is not None:
        show()
    return int(code)


def _exit_code(error: BaseException) -> int | None:
    """Return the exit code of an expected error, None for one that is a fault of the program."""
    kind: type[Any] = type(error)
    if isinstance(error, MemoryError) or kind.__name__ == "RunStopped":
        return FAILED
    expected = isinstance(error, OSError) or kind.__module__.partition(".")[0] in _OURS
    return WRONG_INPUT if expected else None


def _version() -> str:
    try:
        return metadata.version("duecourse")
    except metadata.PackageNotFoundError:
        return "source tree"


def _say(text: str) -> None:
    print(visible(text), file=sys.stderr)


def _interrupt(number: int, frame: object) -> NoReturn:
    raise KeyboardInterrupt
