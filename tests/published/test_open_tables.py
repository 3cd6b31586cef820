"""The Society of Actuaries' archive as XTbML: all is read, and mortality gives l_x or it is said why not."""

from __future__ import annotations

import re
from collections import Counter
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from open_tables import FOLDER

from assumptions.tables import TableError
from assumptions.xtbml import XtbmlTable, read_xtbml
from assumptions.xtbml_axes import rate_table

# Files by their stated content.
MORTALITY = {
    "Population Mortality": 529,
    "Annuitant Mortality": 504,
    "Insured Lives Mortality": 444,
    "CSO/CET": 243,
    "Healthy Lives Mortality": 65,
    "Group Life": 23,
    "Life Table": 21,
    "Disabled Lives Mortality": 10,
    "Generational Mortality": 6,
}
OTHER = {
    "Termination Voluntary": 486,
    "Claim Incidence": 427,
    "Claim Termination": 144,
    "Projection Scale": 57,
    "Claim Cost (in Disability)": 18,
    "ADB, AD&D": 16,
    "Selection Factors": 8,
    "Disability Recovery": 5,
    "Remarriage": 4,
    "Premium Persistency": 2,
}

# How a mortality file gives l_x, or what it holds instead.
WHOLE = "l_x of the file as a whole"
EACH = "l_x of each of several tables"
REASONS = {
    "a table needs every age once": "figures for groups of ages, not for every age",
    "Life Table: rate": "numbers living in place of rates",
    ": rate": "factors on other rates, above 1",
    "by age and calendar year": "rates by age and calendar year",
    "ages must be whole numbers": "rates by age and calendar year, the axes named the wrong way round",
    "part of a year": "rates by month since disablement",
    "no ultimate rates": "select rates for groups of entry ages",
}


def raw_survivors(text: str) -> list[float]:
    """l_x from the text of the last table of a file, without the reader that is tested."""
    living = [1.0]
    for rate in re.findall(r"<Y t=.\s*\d+\s*.>([^<]*)</Y>", text.rpartition("<Table>")[2]):
        living.append(living[-1] * (1 - float(rate)))
    return living


def survivors(path: Path, tables: list[XtbmlTable], number: int | None) -> list[float]:
    # l_x comes from ultimate rates; the keying of select rates, which few files state, makes no difference.
    try:
        rates = rate_table(str(path), tables, number, "entry age")
    except TableError as fault:
        if "as the file says" not in str(fault):
            raise
        rates = rate_table(str(path), tables, number, None)
    living = rates.survivors().tolist()
    assert len(living) == rates.final_age - rates.ultimate_from + 1
    assert all(later <= earlier for earlier, later in pairwise(living))
    assert (living[-1] == 0) == bool((rates.ultimate == 1).any())
    return living


def outcome(path: Path, tables: list[XtbmlTable]) -> str:
    """Say how a mortality file gives l_x, or why it does not; an unforeseen message stands for itself."""
    try:
        living = survivors(path, tables, None)
    except TableError as fault:
        said = str(fault)
    else:
        raw = raw_survivors(path.read_text("utf-8-sig"))
        np.testing.assert_allclose(living, raw, rtol=1e-11, atol=0)
        return WHOLE
    if "several tables" in said:
        try:
            for one in tables:
                survivors(path, tables, one.number)
        except TableError as fault:
            said = str(fault)
        else:
            return EACH
    said = re.sub(r"^.*, age \d+: rate", f"{tables[0].kind}: rate", said)
    return next((reason for words, reason in REASONS.items() if words in said), said)


@pytest.mark.slow
def test_every_file_of_the_archive_is_read() -> None:
    kinds: Counter[str] = Counter()
    counts: Counter[str] = Counter()
    outcomes: Counter[str] = Counter()
    for path in sorted(FOLDER.glob("*.xml")):
        tables = read_xtbml(path)
        kind = tables[0].kind.replace(" / ", "/")
        kinds[kind] += 1
        counts["tables"] += len(tables)
        counts["values"] += sum(int(np.isfinite(one.values).sum()) for one in tables)
        if kind in MORTALITY:
            outcomes[outcome(path, tables)] += 1
    assert kinds == {**MORTALITY, **OTHER}
    assert kinds.total() == 3012
    assert counts == {"tables": 4483, "values": 1_630_716}
    # By what they say they are, 1,845 files are of mortality; these are all of them.
    assert outcomes == {
        WHOLE: 1708,
        EACH: 20,
        "figures for groups of ages, not for every age": 83,
        "numbers living in place of rates": 21,
        "factors on other rates, above 1": 2,
        "rates by age and calendar year": 5,
        "rates by age and calendar year, the axes named the wrong way round": 1,
        "rates by month since disablement": 3,
        "select rates for groups of entry ages": 2,
    }
    assert outcomes.total() == sum(MORTALITY.values()) == 1845
