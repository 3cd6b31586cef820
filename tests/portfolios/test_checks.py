"""The checks of the policies: which rule a policy breaks first, and how it is told."""

from __future__ import annotations

from datetime import date
from typing import Any

import numpy as np
import pyarrow as pa
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from made_extract import VALUATION_DATE, made_designs, made_policies, one_policy

from portfolios.checks import Checked, Checks, check_chunk, needed_columns, number_columns
from portfolios.chunk import Chunk
from portfolios.columns import LARGEST_AMOUNT
from portfolios.exception_rows import SCHEMA, exception_rows, no_exceptions
from portfolios.extract import open_extract
from portfolios.identifiers import Duplicates, find_duplicates
from portfolios.reasons import Reason

DESIGNS = made_designs()
NEEDED = needed_columns(DESIGNS, ["sex"])
INF, NAN = float("inf"), float("nan")


def checked(table: pa.Table, duplicates: Duplicates | None = None) -> tuple[Chunk, Checked]:
    (batch,) = table.combine_chunks().to_batches()
    chunk = Chunk(batch)
    return chunk, check_chunk(
        chunk, DESIGNS, VALUATION_DATE, ["in force"], duplicates or Duplicates(), NEEDED
    )


def outcome(table: pa.Table) -> tuple[Reason, str]:
    _, result = checked(table)
    return Reason(int(result.reason[0])), NEEDED[result.field[0]] if result.field[0] >= 0 else ""


CASES: list[tuple[dict[str, Any], Reason, str]] = [
    ({}, Reason.FINE, ""),
    ({"policy_id": None}, Reason.IDENTIFIER_MISSING, "policy_id"),
    ({"policy_id": ""}, Reason.IDENTIFIER_MISSING, "policy_id"),
    ({"product": None}, Reason.PRODUCT_UNKNOWN, "product"),
    ({"product": "term"}, Reason.PRODUCT_UNKNOWN, "product"),
    ({"status": None}, Reason.NOT_IN_FORCE, "status"),
    ({"status": "lapsed"}, Reason.NOT_IN_FORCE, "status"),
    ({"birth_date": None}, Reason.DATE_MISSING, "birth_date"),
    ({"commencement_date": None}, Reason.DATE_MISSING, "commencement_date"),
    ({"birth_date": date(1799, 12, 31)}, Reason.DATE_OUT_OF_RANGE, "birth_date"),
    ({"birth_date": date(1800, 1, 1)}, Reason.FINE, ""),
    ({"commencement_date": date(2201, 1, 1)}, Reason.DATE_OUT_OF_RANGE, "commencement_date"),
    ({"commencement_date": date(1980, 5, 16)}, Reason.COMMENCED_BEFORE_BIRTH, "commencement_date"),
    ({"commencement_date": date(1980, 5, 17)}, Reason.FINE, ""),
    ({"commencement_date": date(2026, 11, 30)}, Reason.FINE, ""),
    ({"commencement_date": date(2026, 12, 1)}, Reason.COMMENCES_LATER, "commencement_date"),
    ({"sum_assured": None}, Reason.NUMBER_MISSING, "sum_assured"),
    ({"sum_assured": NAN}, Reason.NUMBER_NOT_FINITE, "sum_assured"),
    ({"sum_assured": INF}, Reason.NUMBER_NOT_FINITE, "sum_assured"),
    ({"sum_assured": -INF}, Reason.NUMBER_NOT_FINITE, "sum_assured"),
    ({"sum_assured": -0.01}, Reason.NUMBER_NEGATIVE, "sum_assured"),
    ({"sum_assured": LARGEST_AMOUNT}, Reason.FINE, ""),
    ({"sum_assured": LARGEST_AMOUNT * 2}, Reason.NUMBER_OUT_OF_RANGE, "sum_assured"),
    ({"term_years": 121.0}, Reason.NUMBER_OUT_OF_RANGE, "term_years"),
    ({"term_years": INF}, Reason.NUMBER_NOT_FINITE, "term_years"),
    ({"term_years": 10.5}, Reason.FINE, ""),
    ({"term_years": 10 + 1 / 3}, Reason.FINE, ""),
    ({"term_years": 10.3}, Reason.NOT_WHOLE_MONTHS, "term_years"),
    ({"term_years": 10 + 2e-7}, Reason.NOT_WHOLE_MONTHS, "term_years"),
    ({"premium_frequency": 3.0}, Reason.FREQUENCY_UNKNOWN, "premium_frequency"),
    ({"premium_frequency": 0.0}, Reason.FREQUENCY_UNKNOWN, "premium_frequency"),
    ({"premium_frequency": 365.0}, Reason.FREQUENCY_UNKNOWN, "premium_frequency"),
    ({"premium_frequency": -1.0}, Reason.NUMBER_NEGATIVE, "premium_frequency"),
    # A column that the product's design does not use is not looked at.
    ({"annuity_pa": -1.0, "escalation": INF, "deferral_years": 0.123}, Reason.FINE, ""),
    # Columns that the registry does not list.
    ({"product": "BONUS", "bonus_sum": 5.0, "bonus_years": 3.0}, Reason.FINE, ""),
    ({"product": "BONUS", "bonus_sum": 5.0}, Reason.NUMBER_MISSING, "bonus_years"),
    ({"product": "BONUS", "bonus_sum": -5.0, "bonus_years": 3.0}, Reason.NUMBER_NEGATIVE, "bonus_sum"),
    ({"product": "BONUS", "bonus_sum": 5.0, "bonus_years": 3.01}, Reason.NOT_WHOLE_MONTHS, "bonus_years"),
    # The first check wins.
    ({"policy_id": "", "product": "none", "status": "lapsed"}, Reason.IDENTIFIER_MISSING, "policy_id"),
    ({"product": "none", "status": "lapsed"}, Reason.PRODUCT_UNKNOWN, "product"),
    ({"status": "lapsed", "birth_date": None, "sum_assured": -1.0}, Reason.NOT_IN_FORCE, "status"),
    ({"sum_assured": -1.0, "term_years": None}, Reason.NUMBER_MISSING, "term_years"),
]


@pytest.mark.parametrize(("changes", "reason", "field"), CASES)
def test_first_rule_broken(changes: dict[str, Any], reason: Reason, field: str) -> None:
    assert outcome(one_policy(**changes)) == (reason, field)


def test_every_reason_of_the_checks_is_reached() -> None:
    reached = {reason for _, reason, _ in CASES} | {
        Reason.IDENTIFIER_NOT_UNIQUE,
        Reason.IDENTIFIER_UNREADABLE,
        Reason.LIVES_UNKNOWN,  # in test_second_life
        Reason.STATE_UNKNOWN,  # in tests/projection/test_named_states
    }
    assert reached == {reason for reason in Reason if reason < 20}


def test_escalation_may_be_negative_within_reason() -> None:
    annuity = {"product": "ANN", "deferral_years": 0.0, "guarantee_years": 5.0, "annuity_pa": 9.0,
               "annuity_frequency": 1.0}  # fmt: skip
    assert outcome(one_policy(**annuity, escalation=-0.02)) == (Reason.FINE, "")
    assert outcome(one_policy(**annuity, escalation=-0.9)) == (Reason.NUMBER_OUT_OF_RANGE, "escalation")


def test_made_policies_are_fine() -> None:
    chunk, result = checked(made_policies(2000))
    assert not result.reason.any()
    assert (result.field == -1).all()
    assert [DESIGNS[place].code for place in result.product] == [
        chunk.value("product", row) for row in range(2000)
    ]
    assert (result.product.dtype, result.reason.dtype, result.field.dtype) == (np.int32, np.uint8, np.int16)


def test_shared_identifiers_are_all_exceptions() -> None:
    table = pa.concat_tables([one_policy(policy_id=name) for name in ("A", "B", "A", "A", "C")])
    _, result = checked(table, find_duplicates(open_extract(table)))
    assert result.reason.tolist() == [3, 0, 3, 3, 0]


def test_identifier_that_is_not_text() -> None:
    table = one_policy(policy_id="é").set_column(0, "policy_id", pa.array([b"a\xff"]).view(pa.string()))
    chunk, result = checked(table)
    assert Reason(int(result.reason[0])) is Reason.IDENTIFIER_UNREADABLE
    assert exception_rows(chunk, result, NEEDED)["policy_id"].to_pylist() == ["a\ufffd"]
    assert outcome(one_policy(policy_id="é")) == (Reason.FINE, "")


def test_several_states_may_be_in_force() -> None:
    chunk, _ = checked(one_policy(status="paid up"))
    result = check_chunk(chunk, DESIGNS, VALUATION_DATE, ["in force", "paid up"], Duplicates(), NEEDED)
    assert result.reason.tolist() == [0]


def test_needed_columns_come_in_a_fixed_order() -> None:
    assert NEEDED[:5] == ("policy_id", "product", "status", "birth_date", "commencement_date")
    assert number_columns(DESIGNS)[-2:] == ["bonus_sum", "bonus_years"]
    assert number_columns(DESIGNS) == number_columns(DESIGNS[::-1])
    with pytest.raises(ValueError, match="lack 'bonus_years'"):
        Checks(DESIGNS, VALUATION_DATE, ["in force"], Duplicates(), NEEDED[:-2])


FAULTS = st.sampled_from([changes for changes, _, _ in CASES])


@settings(deadline=None, max_examples=40)
@given(st.lists(FAULTS, min_size=1, max_size=30))
def test_neighbours_do_not_matter(faults: list[dict[str, Any]]) -> None:
    tables = [one_policy(**changes) for changes in faults]
    _, result = checked(pa.concat_tables(tables))
    alone = [outcome(table) for table in tables]
    assert [Reason(int(reason)) for reason in result.reason] == [reason for reason, _ in alone]
    assert [NEEDED[place] if place >= 0 else "" for place in result.field] == [field for _, field in alone]


def test_exception_rows_say_what_is_wrong() -> None:
    table = pa.concat_tables([
        one_policy(),
        one_policy(policy_id="=1+1", sum_assured=-5.5),
        one_policy(policy_id="<script>alert(1)</script>", product="x" * 100),
        one_policy(policy_id="C", status="lap\nsed"),
        one_policy(policy_id=None, product=None),
        one_policy(policy_id="D", birth_date=None),
        one_policy(policy_id="E", term_years=700.0),
        one_policy(policy_id="F", commencement_date=date(2027, 1, 31)),
        one_policy(policy_id="G", sum_assured=NAN),
    ])  # fmt: skip
    chunk, result = checked(table)
    rows = exception_rows(chunk, result, NEEDED).to_pylist()
    assert [row["policy_id"] for row in rows] == [
        "=1+1",
        "<script>alert(1)</script>",
        "C",
        "",
        "D",
        "E",
        "F",
        "G",
    ]
    assert [row["value"] for row in rows] == [
        "-5.5", "x" * 57 + "...", "lap?sed", "", "", "700", "2027-01-31", "nan"
    ]  # fmt: skip
    assert [row["field"] for row in rows] == [
        "sum_assured", "product", "status", "policy_id", "birth_date", "term_years", "commencement_date",
        "sum_assured",
    ]  # fmt: skip
    assert rows[0]["reason"] == "amount negative"
    assert rows[0]["product"] == "TERM"
    assert rows[5]["rule"] == "the value must lie between 0 and 120 years"
    assert all(row["rule"] for row in rows)


def test_rows_for_reasons_of_the_projection() -> None:
    chunk, result = checked(one_policy())
    result.reason[0], result.field[0] = Reason.MATURED, -1
    (row,) = exception_rows(chunk, result, NEEDED).to_pylist()
    assert (row["reason"], row["field"], row["value"]) == ("matured", "", "")


def test_no_exceptions_have_the_same_columns() -> None:
    chunk, result = checked(one_policy())
    assert exception_rows(chunk, result, NEEDED).equals(no_exceptions())
    assert no_exceptions().schema == SCHEMA


def test_value_of_any_type_can_be_shown() -> None:
    table = one_policy().set_column(3, "birth_date", pa.array([2**60], pa.timestamp("s")))
    chunk, result = checked(table)
    (row,) = exception_rows(chunk, result, NEEDED).to_pylist()
    assert row["reason"] == "date out of range"
    assert row["field"] == "birth_date"


def test_reasons_have_words() -> None:
    assert all(reason.words for reason in Reason)
    assert all(reason.rule for reason in Reason if reason)
    assert len({reason.words for reason in Reason}) == len(Reason)
    assert max(Reason) < 256
