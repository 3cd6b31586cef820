"""The report as one web page that needs nothing from outside and prints on A4."""

from __future__ import annotations

from markupsafe import Markup

from .cautions import counted_cautions
from .charts import bar_chart, run_off_chart
from .figures import count, visible, words
from .page_templates import template
from .report import Report, in_blocks

MOST_GROUPS = 500
MOST_EXCEPTIONS = 200
MOST_BARS = 30
MOST_INPUTS = 200


def page(report: Report) -> str:
    """Return the page. Every text from the inputs is escaped, and its control characters become '?'."""
    counts = set(counted_cautions(report.outcome))
    text = template("report.html").render(
        report=report,
        record=report.record,
        settings=report.outcome.settings,
        asked=report.record["settings"],
        total=report.outcome.total,
        sample=report.widest_sample,
        counted_cautions=[text for text in report.record["cautions"] if text in counts],
        standing_cautions=[text for text in report.record["cautions"] if text not in counts],
        groups=report.outcome.group_by,
        group_rows=report.total_rows[:MOST_GROUPS],
        groups_hidden=max(0, len(report.total_rows) - MOST_GROUPS),
        bars=_bars(report),
        run_off=_run_off(report),
        flow_rows=in_blocks(report.years),
        exceptions=report.outcome.exceptions.slice(0, MOST_EXCEPTIONS).to_pylist(),
        exceptions_hidden=max(0, report.outcome.exceptions.num_rows - MOST_EXCEPTIONS),
        inputs=report.record["inputs"][:MOST_INPUTS],
        inputs_hidden=max(0, len(report.record["inputs"]) - MOST_INPUTS),
    )
    return visible(text)


def _bars(report: Report) -> Markup:
    rows = sorted(report.by_first_group, key=lambda row: -row[1])
    if len(rows) > MOST_BARS:
        rest = rows[MOST_BARS - 1 :]
        rows = [*rows[: MOST_BARS - 1], (f"the other {count(len(rest))}", sum(value for _, value in rest))]
    if not rows:
        return Markup("")
    titles = {design["code"]: design["title"] for design in report.record["designs"]}
    named = report.bar_group == "product"
    labelled = [(_label(name, titles.get(name, "") if named else ""), value) for name, value in rows]
    return Markup(bar_chart(f"Reserve by {words(report.bar_group or '')}", labelled, report.currency, report.decimals))


def _label(code: str, title: str) -> str:
    """Return the title of a design, with its code where the title does not already say it."""
    if not title:
        return code
    return title if code.casefold() in title.casefold() else f"{code} {title}"


def _run_off(report: Report) -> Markup:
    years = report.years
    if not years:
        return Markup("")
    chart = run_off_chart(
        [year.label for year in years],
        [year.paid_out for year in years],
        [year.paid_in for year in years],
        report.currency,
    )
    return Markup(chart)
