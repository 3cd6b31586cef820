"""The engine against the plain twin on shocked bases: contracts, bases, policies and shocks at random."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from random_contracts import Example, examples, write_tables
from random_shocks import KINDS, shocks
from test_engine_and_twin import EXAMPLES, SLOW, by_engine, check_policy

from assumptions.basis import Basis
from assumptions.shocking import shocked
from assumptions.shocks import Shock, touched
from projection.settings import Settings


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    place = tmp_path_factory.mktemp("tables")
    write_tables(place)
    return place


def made(basis: Basis, shock: Shock, asked: Settings) -> Basis | None:
    """The shocked basis; None where the basis has nothing to change, or a rate leaves its range."""
    try:
        return shocked(basis, shock, asked.valuation_date)
    except ValueError as error:
        if "must lie above" in str(error) or "the basis has no" in str(error):
            return None
        raise


def check(folder: Path, data: st.DataObject, kinds: tuple[str, ...]) -> None:
    # The shock first: what is drawn last is the first to be cut short.
    shock, example = data.draw(shocks(kinds)), data.draw(examples(folder, most=8))
    basis = made(example.basis, shock, example.settings)
    assume(basis is not None)
    assert basis is not None
    stressed = replace(example, basis=basis)
    chunk, valued = by_engine(stressed)
    for place in range(chunk.n):
        try:
            check_policy(stressed, chunk.policy(place), valued, place)
        except AssertionError:
            # Where they differ without a shock too, that is the matter of the comparison without shocks.
            if agree(example, place):
                raise


def agree(example: Example, place: int) -> bool:
    """Say whether engine and twin agree on a policy on the base."""
    chunk, valued = by_engine(example)
    try:
        check_policy(example, chunk.policy(place), valued, place)
    except AssertionError:
        return False
    return True


@pytest.mark.parametrize("kind", KINDS)
@given(data=st.data())
@settings(max_examples=EXAMPLES // 4, deadline=None, suppress_health_check=SLOW)
def test_same_parts_and_same_refusals_for_each_kind_of_change(folder: Path, kind: str, data: st.DataObject) -> None:
    check(folder, data, (kind,))


@given(data=st.data())
@settings(max_examples=EXAMPLES // 2, deadline=None, suppress_health_check=SLOW)
def test_same_parts_and_same_refusals_together(folder: Path, data: st.DataObject) -> None:
    check(folder, data, KINDS)


@given(data=st.data())
@settings(max_examples=EXAMPLES // 2, deadline=None, suppress_health_check=SLOW)
def test_what_a_shock_leaves_alone_is_the_same_object(folder: Path, data: st.DataObject) -> None:
    shock, example = data.draw(shocks()), data.draw(examples(folder, most=1))
    base, basis = example.basis, made(example.basis, shock, example.settings)
    assume(basis is not None)
    assert basis is not None
    parts = touched(shock)
    if not parts:
        assert basis is base
    if "mortality" not in parts:
        assert basis.document.mortality is base.document.mortality
        assert basis.rates is base.rates
        assert basis.scales is base.scales
        assert basis.adjustments is base.adjustments
    if "lapse" not in parts:
        assert basis.document.lapse is base.document.lapse
        assert basis.lapses is base.lapses
        assert basis.lapse_adjustments is base.lapse_adjustments
    if "interest" not in parts:
        assert basis.curves is base.curves
        assert basis.document.interest is base.document.interest
    if "expenses" not in parts:
        assert basis.document.expense is base.document.expense
    assert (basis.digest == base.digest) == (basis is base)
