"""The in-force gate: no policy may be lost between the extract and the results."""

from __future__ import annotations

import pyarrow as pa

from .results import ControlTotal, SampleCheck


class RunStopped(ValueError):  # noqa: N818 - what happened, in words that a message can use
    """A valuation that must not go on: too many exceptions, a gate that does not close, a sample that differs."""


def check_gate(control: tuple[ControlTotal, ...], exceptions: pa.Table, rows: int, limit: float) -> None:
    """Check that read = valued + listed exceptions, by count and by amount, and that exceptions keep within a limit.

    control: policies first; exceptions: those listed; rows: policies that the files say they hold; limit: share of
    policies that may be exceptions. Raises RunStopped.
    """
    if not control or not control[0].read:
        raise RunStopped("the extract holds no policies")
    for total in control:
        if not total.closes:
            raise RunStopped(
                f"the in-force gate does not close for {total.name}: {total.read:,} read, "
                f"{total.valued:,} valued, {total.exceptions:,} exceptions"
            )
    policies = control[0]
    if policies.read != rows or policies.exceptions != exceptions.num_rows:
        raise RunStopped(
            f"the in-force gate does not close: {rows:,} policies in the files, {policies.read:,} read, "
            f"{policies.exceptions:,} exceptions, {exceptions.num_rows:,} of them listed"
        )
    share = policies.exceptions / policies.read
    if share > limit:
        raise RunStopped(
            f"{policies.exceptions:,} of {policies.read:,} policies are exceptions ({share:.2%}), more than the "
            f"'exceptions_limit' of {limit:.2%} allows ({_commonest(exceptions)}); mend the extract or raise the limit"
        )


def check_sample(result: SampleCheck, on: str = "") -> None:
    """Raise RunStopped where engine and plain twin differ on a sample; on: the basis, in front of what is said."""
    if not result.passes:
        raise RunStopped(
            f"policy {result.policy_id}: {on}the engine and the plain twin differ by {result.largest_difference:.6g} "
            f"({result.largest_relative:.1e} of the value); this is a fault of the program, please report it"
        )


def _commonest(exceptions: pa.Table) -> str:
    counts = exceptions.group_by("reason").aggregate([("reason", "count")])
    first = counts.sort_by([("reason_count", "descending")]).slice(0, 3).to_pylist()
    return ", ".join(f"{row['reason']}: {row['reason_count']:,}" for row in first)
