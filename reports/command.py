"""The command ``duecourse``. Nothing heavy is imported before it is needed, so that help comes at once."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated, NoReturn

import typer

from .exits import FAILED, WRONG_INPUT, end_politely, run_app
from .figures import short, visible
from .installation import strangers, without_pandas

MOST_FAULTS = 40
"""Faults that ``verify`` lists; they are as many as there are groups where a table was exchanged."""

app = typer.Typer(
    name="duecourse",
    help="""Reserves for the policies of a life office: Parquet in, Parquet out.

    A run is a TOML document that names the extract, the product designs and the basis. To see it work:

    \b
        duecourse demo office
        duecourse check office/month-end.toml
        duecourse reserve office/month-end.toml --out office/november
        duecourse verify office/november

    'duecourse COMMAND --help' shows an example of each command, 'duecourse --version' the version.
    Exit codes: 0 all is well, 1 the run or the verification failed, 2 the input is wrong.""",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
)

RunDocumentPath = Annotated[Path, typer.Argument(metavar="RUN", help="The run document, a TOML file.")]
Threads = Annotated[
    int | None,
    typer.Option(metavar="N", min=1, max=1024, help="Threads to value with; by default as many as there are cores."),
]


@app.command(short_help="Write an invented office, ready to run.")
def demo(
    folder: Annotated[Path, typer.Argument(metavar="FOLDER", help="Folder to write; must not exist or be empty.")],
    policies: Annotated[
        int, typer.Option(metavar="N", min=1, max=100_000_000, help="Policies in the extract.")
    ] = 10_000,
    seed: Annotated[
        int, typer.Option(metavar="S", min=0, help="The same seed gives the same office, to the byte.")
    ] = 1,
) -> None:
    """Write an invented office: extract, designs, bases and run documents, ready to run.

    \b
    Example:
        duecourse demo office --policies 100000
        duecourse reserve office/month-end.toml --out office/november
    """
    from portfolios.demo_office import write_office

    from .disk import plainly
    from .progress import progress_on

    with plainly(folder), progress_on("writing the demo") as progress:
        write_office(folder, policies, seed, progress)
    print(f"An invented office of {policies:,} policies is in {folder}.")
    print("About a dozen of them are wrong on purpose. Next:")
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
    print(visible("\n".join(checked.lines)))
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

    report = reserve_run(run, out, progress_on, replace_finished=replace, threads=threads, workbook=not no_workbook)
    print(visible(summary(report, str(out))))


@app.command(short_help="Premiums and rate tables by equivalence.")
def premium(
    run: RunDocumentPath,
    out: Annotated[Path, typer.Option(metavar="FOLDER", help="Run folder to write: complete, or not at all.")],
    replace: Annotated[bool, typer.Option("--replace", help="Replace a finished run of this name.")] = False,
    no_workbook: Annotated[bool, typer.Option("--no-workbook", help="Leave out report.xlsx.")] = False,
) -> None:
    """Work out the amount at which a new contract's benefits and premiums are worth the same, cell by cell.

    The premium document names the design, the basis, the amount asked for, and the axes of the table: ages, terms,
    frequencies or any other columns. Rates are per unit of size, rounded, and checked against one another.

    
    The run folder holds
        rates.parquet         every cell: rate, amount, values
        findings.parquet      rates that do not rise, fall or bend as they should
        run.json              the record: inputs and outputs with SHA-256, settings, cautions
        report.html, report.xlsx    rate tables and heat maps for people

    
    Example:
        duecourse premium office/premium.toml --out office/rates
    """
    from .premium_console import premium_summary
    from .premium_run import premium_run

    report = premium_run(run, out, replace_finished=replace, workbook=not no_workbook)
    print(visible(premium_summary(report, str(out))))


@app.command(short_help="Show the working of one policy.")
def explain(
    run: RunDocumentPath,
    policy: Annotated[str, typer.Argument(metavar="POLICY", help="Identifier of the policy, as in the extract.")],
    out: Annotated[
        Path | None,
        typer.Option(metavar="FILE", help="Write the working to this file: a workbook if it ends in .xlsx, else text."),
    ] = None,
    basis: Annotated[
        str, typer.Option(metavar="NAME", help="One of the run's further bases, in place of its own.")
    ] = "",
) -> None:
    """Show the working of one policy: every date, age, rate, probability, discount factor and payment.

    \b
    Example:
        duecourse explain office/month-end.toml QM-000000011-5
        duecourse explain office/month-end.toml QM-000000011-5 --out working.txt
        duecourse explain office/month-end.toml QM-000000011-5 --out working.xlsx
    """
    from .disk import write_whole
    from .explain import as_workbook, explain_in_workbook
    from .explain import explain as explain_policy

    if out is None:
        print(explain_policy(run, policy, basis), end="")
        return
    as_book = as_workbook(out)
    content = explain_in_workbook(run, policy, basis) if as_book else explain_policy(run, policy, basis).encode()
    write_whole(out, content)
    print(visible(f"The working of {short(policy)} is in {out}."))


@app.command(short_help="Alter one policy at equal value.")
def alter(
    run: RunDocumentPath,
    policy: Annotated[str, typer.Argument(metavar="POLICY", help="Identifier of the policy, as in the extract.")],
    solve: Annotated[str, typer.Option(metavar="COLUMN", help="The amount to find.")],
    change: Annotated[
        list[str] | None, typer.Option("--set", metavar="COLUMN=VALUE", help="A change; may be given several times.")
    ] = None,
    charge: Annotated[float, typer.Option(metavar="AMOUNT", help="Taken from the reserve.")] = 0.0,
    basis: Annotated[
        str, typer.Option(metavar="NAME", help="One of the run's further bases, in place of its own.")
    ] = "",
) -> None:
    """Change a policy and find the amount at which its reserve stays what it is, less a charge.

    Paid-up sums, changed terms and sums, and changes of product are worked out in this way; the extract is not
    touched.

    \b
    Example:
        duecourse alter office/month-end.toml QM-000000011-5 --set premium_pa=0 --solve sum_assured
    """
    from .alter import alter_policy

    print(visible(alter_policy(run, policy, change or [], solve, charge, basis)), end="")


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
    for kind, lines in (("ok    ", found.sound), ("note  ", found.notes)):
        for line in lines:
            print(visible(f"{kind} {line}"))
    for line in found.faults[:MOST_FAULTS]:
        print(visible(f"WRONG  {line}"))
    if len(found.faults) > MOST_FAULTS:
        print(f"WRONG  and {len(found.faults) - MOST_FAULTS:,} more of the kind")
    print(f"{folder}: {'as recorded' if found.holds else 'NOT as recorded'}.")
    if not found.holds:
        raise typer.Exit(FAILED)


def main() -> NoReturn:
    """Run the command and leave with its exit code."""
    faults = strangers()
    if faults:
        print("\n".join(faults), file=sys.stderr)
        sys.exit(WRONG_INPUT)
    end_politely()
    without_pandas()
    sys.exit(run_command())


def run_command(arguments: list[str] | None = None) -> int:
    """Run the command with these arguments, by default those of the process; return its exit code."""
    return run_app(app, sys.argv[1:] if arguments is None else arguments)


if __name__ == "__main__":
    main()
