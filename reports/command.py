"""The command ``duecourse``. Nothing heavy is imported before a command needs it, so that help comes at once."""

from __future__ import annotations

import os
import signal
import sys
from pathlib import Path
from typing import Annotated, Any, NoReturn

import typer

from .installation import strangers

WRONG_INPUT = 2
FAILED = 1
INTERRUPTED = 130


def _version(wanted: bool) -> None:
    if wanted:
        from importlib import metadata

        print(f"duecourse {metadata.version('duecourse')}")
        raise typer.Exit


app = typer.Typer(
    name="duecourse",
    help="""Reserves for the policies of a life office: Parquet in, Parquet out.

    A run is a TOML document that names the extract, the product designs and the basis. To see it work:

    \b
        duecourse demo office
        duecourse check office/month-end.toml
        duecourse reserve office/month-end.toml --out office/november
        duecourse verify office/november

    'duecourse COMMAND --help' shows an example of each command. Exit codes: 0 all is well, 1 the run or the
    verification failed, 2 the input is wrong.""",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
)


@app.callback()
def _options(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Show the version and exit.")
    ] = False,
) -> None:
    """Options of the command itself; its help is that of the app."""


RunDocumentPath = Annotated[Path, typer.Argument(metavar="RUN", help="The run document, a TOML file.")]
Threads = Annotated[
    int | None, typer.Option(metavar="N", min=1, max=1024, help="Threads to value with; by default as many as there are cores.")
]


@app.command(short_help="Write an invented office, ready to run.")
def demo(
    folder: Annotated[Path, typer.Argument(metavar="FOLDER", help="Folder to write; must not exist or be empty.")],
    policies: Annotated[int, typer.Option(metavar="N", min=1, max=100_000_000, help="Policies in the extract.")] = 10_000,
    seed: Annotated[int, typer.Option(metavar="S", min=0, help="The same seed gives the same office, to the byte.")] = 1,
) -> None:
    """Write an invented office: extract, designs, bases and run documents, ready to run.

    \b
    Example:
        duecourse demo office --policies 100000
        duecourse reserve office/month-end.toml --out office/november
    """
    from portfolios.demo_office import write_office

    from .progress import progress_on

    with progress_on("writing the demo") as progress:
        write_office(folder, policies, seed, progress)
    print(f"An invented office of {policies:,} policies is in {folder}. A few of them are wrong on purpose. Next:")
    print(f"    duecourse reserve {folder / 'month-end.toml'} --out {folder / 'results'}")


@app.command(short_help="Read everything, keep nothing, say what is wrong.")
def check(run: RunDocumentPath, threads: Threads = None) -> None:
    """Read everything that a run would, keep nothing, and say what is wrong.

    Documents, columns and every policy are checked as in the run itself. Policies that cannot be valued are
    counted by reason, with the first examples of each.

    \b
    Example:
        duecourse check office/month-end.toml
    """
    from .check_run import check_run
    from .progress import progress_on

    with progress_on("checking") as progress:
        checked = check_run(run, progress, threads)
    print("\n".join(checked.lines))
    if not checked.ready:
        raise typer.Exit(WRONG_INPUT)


@app.command(short_help="The month-end run: value all policies, leave a run folder.")
def reserve(
    run: RunDocumentPath,
    out: Annotated[Path, typer.Option(metavar="FOLDER", help="Run folder to write: complete, or not at all.")],
    replace: Annotated[bool, typer.Option("--replace", help="Replace a finished run of this name.")] = False,
    threads: Threads = None,
    no_workbook: Annotated[bool, typer.Option("--no-workbook", help="Leave out report.xlsx.")] = False,
) -> None:
    """Value every policy in force and leave a run folder behind: the month-end run.

    \b
    The run folder holds
        policies/*.parquet    the reserve of each policy and its parts
        totals.parquet        totals by the groups that the run document asks for
        cash_flows.parquet    expected cash flows by calendar month and stream
        exceptions.parquet    every policy that could not be valued, with the reason
        run.json              the record: inputs and outputs with SHA-256, settings, totals, cautions
        report.html, report.xlsx    the same for people

    \b
    Example:
        duecourse reserve office/month-end.toml --out office/november
        duecourse reserve office/month-end.toml --out office/november --replace --threads 4
    """
    from .console import summary
    from .progress import progress_on
    from .reserve_run import reserve_run

    report = reserve_run(
        run, out, progress_on, replace_finished=replace, threads=threads, workbook=not no_workbook
    )
    print(summary(report, str(out)))


@app.command(short_help="Show the working of one policy.")
def explain(
    run: RunDocumentPath,
    policy: Annotated[str, typer.Argument(metavar="POLICY", help="Identifier of the policy, as in the extract.")],
    out: Annotated[Path | None, typer.Option(metavar="FILE", help="Write the working to this text file.")] = None,
) -> None:
    """Show the working of one policy: every date, age, rate, probability, discount factor and payment.

    \b
    Example:
        duecourse explain office/month-end.toml TM-0000042-1
        duecourse explain office/month-end.toml TM-0000042-1 --out working.txt
    """
    from .explain import explain as explain_policy

    text = explain_policy(run, policy)
    if out is None:
        print(text)
    else:
        from .run_folder import write_text

        write_text(out, text.rstrip("\n") + "\n")
        print(f"The working of {policy} is in {out}.")


@app.command(short_help="Check a finished run folder against its record.")
def verify(
    folder: Annotated[Path, typer.Argument(metavar="FOLDER", help="A finished run folder.")],
    inputs: Annotated[
        Path | None, typer.Option(metavar="FOLDER", help="Where the run document lies now, if it has moved.")
    ] = None,
    no_inputs: Annotated[bool, typer.Option("--no-inputs", help="Look at the run folder only.")] = False,
) -> None:
    """Check a finished run folder against its record.

    Every file is hashed again, the totals are added up again from the policies, the in-force gate is closed
    again, and inputs that are still there are compared. What is wrong is said file by file.

    \b
    Example:
        duecourse verify office/november
    """
    from .verify import verify as verify_folder

    found = verify_folder(folder, inputs, not no_inputs)
    print("\n".join([*(f"ok     {line}" for line in found.sound), *(f"note   {line}" for line in found.notes)]))
    for line in found.faults:
        print(f"WRONG  {line}")
    print(f"{folder}: {'as recorded' if found.holds else 'NOT as recorded'}.")
    if not found.holds:
        raise typer.Exit(FAILED)


def main() -> NoReturn:
    """Run the command and leave with its exit code."""
    faults = strangers()
    if faults:
        _say("\n".join(faults))
        sys.exit(WRONG_INPUT)
    # A batch system's polite end must clean up as Ctrl-C does.
    signal.signal(signal.SIGTERM, _interrupt)
    sys.exit(run_command())


def run_command(arguments: list[str] | None = None) -> int:
    """Run the command with these arguments, by default those of the process; return its exit code."""
    try:
        result = app(args=arguments, prog_name="duecourse", standalone_mode=False)
    except KeyboardInterrupt:
        _say("Interrupted; nothing was left behind.")
        return INTERRUPTED
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
    return result if isinstance(result, int) else 0


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
    if isinstance(error, OSError):
        return WRONG_INPUT
    return WRONG_INPUT if kind.__module__.partition(".")[0] in {"assumptions", "portfolios", "projection", "reports"} else None


def _say(text: str) -> None:
    print(text, file=sys.stderr)


def _interrupt(number: int, frame: object) -> NoReturn:
    raise KeyboardInterrupt


if __name__ == "__main__":
    main()
