from __future__ import annotations

import pytest
from pydantic import BaseModel

from assumptions.basis import BasisDocument
from portfolios.columns import COLUMNS
from portfolios.designs import Design
from projection.premium_document import PremiumDocument
from projection.run_document import RunDocument
from reports.reference import FOLDER, OUTPUT_TABLES, columns_page, documents_page


@pytest.mark.parametrize(("name", "text"), [("documents.md", documents_page()), ("columns.md", columns_page())])
def test_the_pages_are_as_the_program_has_it(name: str, text: str) -> None:
    assert (FOLDER / name).read_text(encoding="utf-8") == text, "run: python -m reports.reference"


@pytest.mark.parametrize("model", [RunDocument, BasisDocument, Design, PremiumDocument])
def test_every_key_is_there_with_its_meaning(model: type[BaseModel]) -> None:
    page = documents_page()
    for name, field in model.model_fields.items():
        assert f"| `{field.alias or name}` |" in page
        assert field.description
        assert f"{field.description} |" in page


PREMIUM_TABLES = ("rates.parquet", "findings.parquet")
"""Tables of a premium run."""


def test_every_column_is_there() -> None:
    page = columns_page()
    assert all(f"| `{column.name}` |" in page for column in COLUMNS)


def test_output_columns_are_those_of_a_run(finished: object) -> None:
    from pathlib import Path

    import pyarrow.parquet as pq

    folder = Path(str(finished))
    groups = {"product", "sex"}
    for name, columns in OUTPUT_TABLES.items():
        if name in PREMIUM_TABLES:
            continue
        path = folder / name.replace("*", "part-00000")
        listed = {column for column, _, _ in columns if not column.startswith("*")}
        assert set(pq.read_schema(path).names) - groups == listed - groups
