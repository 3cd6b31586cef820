"""Slopes of the invented office: closed forms, general-purpose differentiation, the same bits in any pieces."""

from __future__ import annotations

from dataclasses import replace
from datetime import date
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from scipy.differentiate import derivative

from assumptions.basis import Basis, BasisDocument, prepare_basis
from assumptions.interest import curve_from
from portfolios.demo_office import write_office
from portfolios.designs import Design
from portfolios.extract import open_extract
from projection.documents import DocumentError, check_document, read_basis, read_designs
from projection.settings import Settings
from projection.slope_run import Slopes, slopes_of
from projection.slopes_interest import KEY_MATURITIES, tents
from projection.unrounded import Valuer

TODAY = date(2026, 11, 30)

pytestmark = pytest.mark.compiled


class Office:
    """The invented office with 1,200 policies."""

    def __init__(self, folder: Path) -> None:
        self.designs: list[Design] = read_designs(folder / "designs")
        self.basis: Basis = read_basis(folder / "bases" / "statutory.toml")
        rows = pq.read_table(folder / "inforce")
        ids = rows.column("policy_id").to_pylist()
        # Two policies of the office share an identifier on purpose, and are not valued.
        self.table: pa.Table = rows.filter(pa.array([ids.count(name) == 1 for name in ids]))

    def slopes(self, **asked: Any) -> Slopes:
        return slopes_of(open_extract(self.table), self.designs, self.basis, Settings(TODAY), **asked)

    def value(self, basis: Basis) -> float:
        valuer = Valuer(self.table, self.designs, basis, Settings(TODAY))
        return float(np.nansum(valuer.value(self.table).reserve))


@pytest.fixture(scope="module")
def office(tmp_path_factory: pytest.TempPathFactory) -> Office:
    place = tmp_path_factory.mktemp("demo") / "office"
    write_office(place, 1_200, 4)
    return Office(place)


@pytest.fixture(scope="module")
def slopes(office: Office) -> Slopes:
    return office.slopes(threads=1)


def rows_of(found: Slopes, part: str) -> list[dict[str, Any]]:
    return [row for row in found.table.to_pylist() if row["part"] == part]


def test_streams_add_up_to_the_reserve(office: Office, slopes: Slopes) -> None:
    assert sum(slopes.streams.column("value").to_pylist()) == pytest.approx(office.value(office.basis), rel=1e-9)


def test_a_flat_rate_by_general_purpose_differentiation(office: Office, slopes: Slopes) -> None:
    """scipy.differentiate.derivative, an adaptive difference of its own, on the total reserve."""
    for row in rows_of(slopes, "interest"):
        place = row["rule"] - 1
        flat = office.basis.document.interest.rule[place].flat
        assert flat is not None

        def total(rates: Any, place: int = place) -> Any:
            def one(rate: float) -> float:
                curves: list[Any] = list(office.basis.curves)
                curves[place] = curve_from(flat=float(rate))
                return office.value(replace(office.basis, curves=tuple(curves)))

            return np.vectorize(one)(rates)

        found = derivative(total, flat, initial_step=1e-3, maxiter=3)
        assert row["slope"] == pytest.approx(float(found.df), rel=1e-8)


def test_mortality_moved_in_proportion_everywhere(office: Office, slopes: Slopes) -> None:
    """The sum of the relative slopes is the derivative to one multiple for all rules, by scipy again."""

    def total(multiples: Any) -> Any:
        def one(multiple: float) -> float:
            document = office.basis.document
            rules = [rule.model_copy(update={"multiple": rule.multiple * multiple}) for rule in document.mortality.rule]
            mortality = document.mortality.model_copy(update={"rule": rules})
            return office.value(replace(office.basis, document=document.model_copy(update={"mortality": mortality})))

        return np.vectorize(one)(multiples)

    found = derivative(total, 1.0, initial_step=1e-3, maxiter=3)
    assert sum(row["relative"] for row in rows_of(slopes, "mortality")) == pytest.approx(float(found.df), rel=1e-7)


def test_key_rates_add_up_to_a_parallel_shift(slopes: Slopes) -> None:
    (shift,) = slopes.parallel.to_pylist()
    keys = rows_of(slopes, "key rate")
    assert {row["at"] for row in keys} == set(KEY_MATURITIES)
    assert sum(row["slope"] for row in keys) == pytest.approx(shift["first"], rel=1e-12)
    # With flat interest a shift of all spot rates is one of the flat rate.
    flat = sum(row["slope"] for row in rows_of(slopes, "interest"))
    assert shift["first"] == pytest.approx(flat, rel=1e-12)
    assert shift["second"] > 0


def test_tents_add_up_to_one() -> None:
    times = np.array([0.0, 0.5, 1, 1.7, 2, 4, 5, 11, 25, 40, 70])
    np.testing.assert_allclose(tents(times).sum(axis=0), 1, rtol=1e-15)
    assert tents(np.array([6.0]))[3:5, 0].tolist() == [0.5, 0.5]


ANNUITY = {
    "name": "annuity",
    "direction": "out",
    "amount": "annuity_pa",
    "while": "certain",
    "to": 20,
    "paid": "arrears",
}


def certain(rate: float) -> tuple[list[Design], Basis, pa.Table]:
    basis = {
        "mortality": {"rule": [{"table": {"law": "Makeham", "A": 0.0, "B": 1e-5, "c": 1.1}}]},
        "interest": {"rule": [{"flat": rate}]},
    }
    policy = pa.table(
        {
            "policy_id": ["1"],
            "product": ["SURE"],
            "status": ["in force"],
            "birth_date": [date(1980, 5, 1)],
            "commencement_date": [TODAY],
            "annuity_pa": [1000.0],
        }
    )
    design = check_document({"code": "SURE", "stream": [ANNUITY]}, Design, "design")
    return [design], prepare_basis(check_document(basis, BasisDocument, "basis")), policy


def test_an_annuity_certain_in_closed_form() -> None:
    """a = sum v^t: da/di = -sum t v^(t+1), d2a/di2 = sum t (t+1) v^(t+2); compound interest, any textbook."""
    designs, basis, policy = certain(0.03)
    found = slopes_of(open_extract(policy), designs, basis, Settings(TODAY, decimals=4))
    v, t = 1 / 1.03, np.arange(1, 21)
    first, second = -1000 * float((t * v ** (t + 1)).sum()), 1000 * float((t * (t + 1) * v ** (t + 2)).sum())
    (shift,) = found.parallel.to_pylist()
    assert shift["first"] == pytest.approx(first, rel=1e-9)
    assert shift["second"] == pytest.approx(second, rel=1e-9)
    assert not rows_of(found, "mortality")
    keys = {row["at"]: row["slope"] for row in rows_of(found, "key rate")}
    assert keys[1] == pytest.approx(-1000 * v**2, rel=1e-8)
    assert keys[40] == 0
    assert keys[30] == 0


def test_pieces_and_threads_change_no_digit(office: Office) -> None:
    first = office.slopes(threads=1, group_by=("product",))
    for threads, chunk_rows in ((2, 70), (1, 333), (2, 65_536)):
        again = office.slopes(threads=threads, chunk_rows=chunk_rows, group_by=("product",))
        for name in ("table", "streams", "parallel"):
            assert getattr(again, name).equals(getattr(first, name)), name


def test_groups_add_up(office: Office, slopes: Slopes) -> None:
    by_group = office.slopes(group_by=("product", "sex"))
    for part in ("mortality", "lapse", "interest", "key rate"):
        whole = {(row["rule"], row["at"], row["duration"]): row["slope"] for row in rows_of(slopes, part)}
        sums: dict[Any, float] = {}
        for row in rows_of(by_group, part):
            key = row["rule"], row["at"], row["duration"]
            sums[key] = sums.get(key, 0.0) + row["slope"]
        largest = max(map(abs, whole.values()))
        # What cancels in the whole to nothing has no row there.
        for key, slope in sums.items():
            assert slope == pytest.approx(whole.get(key, 0.0), abs=1e-9 * largest), (part, key)
        assert set(whole) <= set(sums)


def test_no_slopes_of_woolhouse_s_third_term(office: Office) -> None:
    designs, basis, policy = certain(0.03)
    stream = {**ANNUITY, "while": "alive", "a_year": 12, "payments": "Woolhouse 3"}
    designs = [check_document({"code": "SURE", "stream": [stream]}, Design, "design")]
    with pytest.raises(DocumentError, match="design SURE, stream 'annuity'"):
        slopes_of(open_extract(policy), designs, basis, Settings(TODAY))
