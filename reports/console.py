"""What the commands print: plain text that lines up, in a terminal as in a log."""

from __future__ import annotations

from projection.results import MONEY_COLUMNS

from .figures import amount, count, counted, lines_up, seconds, short, shown, words
from .report import Report

MOST_GROUPS = 40


def summary(report: Report, out: str) -> str:
    """Return the summary of a finished run."""
    settings = report.outcome.settings
    blocks = [
        [f"{report.title}  (valuation date {settings.valuation_date.isoformat()}, {report.currency})"],
        _gate(report),
        _groups(report),
        _bases(report),
        _exceptions(report),
        [_sample(report)],
        _speed(report),
        [f"Results in {out}: report.html for people, run.json is the record."],
        ["Unsigned: a qualified person must judge these results; this is not an actuarial opinion."],
    ]
    return "\n\n".join("\n".join(block) for block in blocks if block)


def _gate(report: Report) -> list[str]:
    rows = [["", "read", "valued", "exceptions", ""]]
    for name, read, valued, exceptions, closes in report.control_rows:
        rows.append([name, read, valued, exceptions, "closes" if closes else "DOES NOT CLOSE"])
    return lines_up(rows, right=(1, 2, 3))


def _groups(report: Report) -> list[str]:
    groups = report.outcome.group_by
    rows = [[*map(words, groups), "policies", "reserve", "benefits", "expenses", "premiums"]]
    for row in report.total_rows[:MOST_GROUPS]:
        rows.append([*(short(shown(row[name])) for name in groups), *_figures(row, report.decimals)])
    lines = lines_up([*rows, _total_row(report, len(groups))], right=range(len(groups), len(groups) + 5))
    lines.insert(-1, "-" * max(map(len, lines)))
    hidden = len(report.total_rows) - MOST_GROUPS
    if hidden > 0:
        lines.insert(-2, f"... and {counted(hidden, 'more group')} in totals.parquet")
    if report.rounding:
        lines.append(f"Parts are rounded one by one; they differ from the reserve by {report.money(report.rounding)}.")
    return lines


def _figures(row: dict[str, object], decimals: int) -> list[str]:
    names = ("reserve", "value_of_benefits", "value_of_expenses", "value_of_premiums")
    return [count(int(str(row["policies"]))), *(amount(float(str(row[name])), decimals) for name in names)]


def _total_row(report: Report, groups: int) -> list[str]:
    total = report.outcome.total
    names = ("reserve", "value_of_benefits", "value_of_expenses", "value_of_premiums")
    labels = ["total", *[""] * (groups - 1)] if groups else []
    return [*labels, count(report.outcome.valued), *(report.money(total[name]) for name in names)]


def _bases(report: Report) -> list[str]:
    if not report.outcome.further:
        return []
    own = report.outcome.total["reserve"]
    rows = [["basis", "reserve", "benefits", "expenses", "premiums", "reserve less the first"]]
    for name, title, total in report.basis_rows:
        figures = [report.money(total[column]) for column in MONEY_COLUMNS]
        less = report.money(total["reserve"] - own) if name else ""
        rows.append([short(f"{name}: {title}" if name else title), *figures, less])
    return lines_up(rows, right=range(1, 6))


def _exceptions(report: Report) -> list[str]:
    found = report.record["exceptions_by_reason"]
    if not found:
        return ["No exceptions."]
    rows = [
        ["exceptions by reason", "policies"],
        *([reason, count(number)] for reason, number in found.items()),
    ]
    return lines_up(rows, right=(1,))


def _sample(report: Report) -> str:
    sample = report.widest_sample
    verdict = "agree" if sample.passes else "DIFFER"
    several = f" on {len(report.basis_rows)} bases" if report.outcome.further else ""
    return (
        f"Sample: {counted(sample.policies, 'policy', 'policies')} valued a second time{several} by the plain "
        f"implementation {verdict}; largest difference {sample.largest_difference:.2e} {report.currency}."
    )


def _speed(report: Report) -> list[str]:
    timings = report.outcome.timings
    taken = timings.get("altogether", 0.0)
    valuing = timings.get("valuing", 0.0)
    rate = f", {count(round(report.outcome.read / valuing))} policies a second" if valuing else ""
    return [f"Time taken: {seconds(taken)} altogether, {seconds(valuing)} of it valuing{rate}."]
