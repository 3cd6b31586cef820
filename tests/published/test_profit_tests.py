"""Published profit tests: vectors, signatures, margins and internal rates of return."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from citations import cited
from contracts import nearest_is_key, printed

from projection.profit_measures import internal_rates, present_value, profit_margin
from projection.profit_vector import emerging

GIVEN: dict[str, dict[str, Any]] = {
    "C01": {"S": 1e6, "q": [0.014, 0.015, 0.016], "i": 0.06, "G": 14500, "exp0": 1000, "exp_annual": 100,
            "reserves": [0, 700, 700, 0], "r": 0.1},
    "C04": {"G": 1000, "r": 0.12, "vector": [-400, 150, 274, 395], "signature": [-400, 150, 245, 300]},
    "C06": {"signature": [-1000, 197.37, 288.81, 352.48, 499.64, 541.48]},
    "C07": {"G": 100, "S": 10000, "acq": 100, "pct": 0.08, "qd": [0.001, 0.0013], "qw": [0.04, 0.04], "i": 0.05,
            "V1": 60, "r": 0.1},
    "C17": {"S": 1e6, "preissue": 10000, "annual_exp": 250, "G": 19750, "i": 0.06,
            "qd": [0.015, 0.017, 0.019, 0.021, 0.023], "qw_ind": 0.1, "reserves": [0, 4000, 6000, 6000, 4000, 0]},
}  # fmt: skip
"""What the sources give."""


@cited("C01")
def test_term_assurance_of_three_years(case: str) -> None:
    given = GIVEN[case]
    q = np.array(given["q"])
    alive = np.append(1.0, np.cumprod(1 - q))
    start = given["G"] - np.full(3, given["exp_annual"])
    # The charge before outset comes on top of the yearly one of the first year.
    found = emerging(start, given["S"] * q, given["i"], given["reserves"], alive, outset=given["exp0"])
    np.testing.assert_allclose(found.vector, [-1000.0, 573.8, 316.5, 6.0], atol=0.05)  # recomputed by the collector
    assert round(present_value(found.signature, given["r"])) == printed(case)["NPV"]
    assert nearest_is_key(case, present_value(found.signature, given["r"]), "NPV")


@cited("C04")
def test_margin_from_vector_and_signature(case: str) -> None:
    given = GIVEN[case]
    vector, signature = np.array(given["vector"], float), np.array(given["signature"], float)
    # A signature is the vector times the share in force at the period's start, also the share that pays premium.
    paying = (signature / vector)[1:]
    margin = profit_margin(signature, given["G"] * paying, given["r"])
    assert margin == pytest.approx(printed(case)["margin"], abs=5e-4)
    assert nearest_is_key(case, margin, "margin")


@cited("C06")
def test_internal_rate_of_return(case: str) -> None:
    found = internal_rates(GIVEN[case]["signature"])
    assert found.rates[0] == pytest.approx(printed(case)["IRR"], abs=5e-3)
    assert found.words == "one internal rate of return (one change of sign)"


@cited("C07")
def test_term_assurance_with_refunds_on_lapse(case: str) -> None:
    given = GIVEN[case]
    qd, qw = np.array(given["qd"]), np.array(given["qw"])
    alive = np.append(1.0, np.cumprod(1 - qd - qw))
    refund = 0.25 * given["G"] * np.array([1, 2])
    start = np.full(2, given["G"] * (1 - given["pct"]))
    held = [0, given["V1"], 0]
    found = emerging(start, given["S"] * qd + refund * qw, given["i"], held, alive, outset=given["acq"])
    assert nearest_is_key(case, present_value(found.signature, given["r"]), "EPV")


@cited("C17")
def test_term_assurance_with_surrenders(case: str) -> None:
    given, figures = GIVEN[case], printed(case)
    qd = np.array(given["qd"])
    qw = given["qw_ind"] * (1 - qd)
    qw[-1] = 0.0  # by the sheet: the last year has neither cash value nor reserve, so nobody's leaving counts
    alive = np.append(1.0, np.cumprod(1 - qd - qw))
    held = np.array(given["reserves"], float)
    # The cash value is paid at the year's end, of the reserve at its start; the last year pays none.
    cash = 0.8 * held[:-1] * np.append(np.ones(4), 0)
    start = np.full(5, given["G"] - given["annual_exp"])
    found = emerging(start, given["S"] * qd + cash * qw, given["i"], held, alive, outset=given["preissue"])
    for name, value in {f"Pr{t}": found.vector[t] for t in range(1, 6)}.items():
        assert value == pytest.approx(figures[name], abs=0.005), name
    for t in (1, 3, 4, 5):
        assert found.signature[t] == pytest.approx(figures[f"Pi{t}"], abs=0.005)
    for t in (2, 3, 4):
        assert (cash * qw)[t - 1] == pytest.approx(figures[f"cv_cost{t}"], abs=0.005)
    for t in range(1, 5):
        cost = found.increase_in_reserve[t - 1] + held[t - 1]
        assert cost == pytest.approx(figures[f"res_cost{t}"], abs=0.005)
