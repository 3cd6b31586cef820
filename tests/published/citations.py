"""Test ids that cite: the document and question that a published figure comes from."""

from __future__ import annotations

import pytest
from contracts import BY_ID


def citation(case: str) -> str:
    """Id, document, question and title of a case in one line."""
    source = BY_ID[case]["source"]
    question = f", question {source['question']}" if "question" in source else ""
    return f"{case}: {source['document']}{question}: {BY_ID[case]['title']}"


def cited(*cases: str) -> pytest.MarkDecorator:
    """Run a test once for each case, whose citation becomes the test id; the test takes ``case``."""
    return pytest.mark.parametrize("case", [pytest.param(case, id=citation(case)) for case in cases])
