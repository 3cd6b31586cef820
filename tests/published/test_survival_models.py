"""Survival models: values of the standard and illustrative tables as those of one policy.

Tolerances are half a unit of the last printed digit; anything wider is explained beside the check.
"""

from __future__ import annotations

import re
from typing import Any

import pytest
from contracts import ILLUSTRATIVE, SELECT, STANDARD, annuity, insurance, nearest_is_key, once, printed, value
from open_tables import FOLDER

from assumptions.laws import Law

RATE = 0.05
"""Interest of the standard model."""

NOTATION = [
    (r"A_(\d+)", lambda x: ([insurance()], x)),
    (r"adue_(\d+)", lambda x: ([annuity()], x)),
    (r"adue_(\d+):(\d+)", lambda x, n: ([annuity(0, n)], x)),
    (r"(\d+)E(\d+)", lambda n, x: ([once(n)], x)),
    (r"(\d+)\|adue_(\d+)", lambda n, x: ([annuity(n)], x)),
    (r"A1_(\d+):(\d+)", lambda x, n: ([insurance(0, n)], x)),
    (r"q_(\d+)", lambda x: ([insurance(0, 1)], x)),
]


def in_notation(symbol: str) -> tuple[list[dict[str, Any]], int]:
    """Streams and age of a symbol of the International Actuarial Notation, as the cases write it."""
    for pattern, made in NOTATION:
        found = re.fullmatch(pattern, symbol)
        if found:
            return made(*(int(part) for part in found.groups()))
    raise ValueError(symbol)


def half_a_unit(figure: float, places: int) -> float:
    """Half a unit of the last printed place, and the error of the printed figure's own double."""
    return 0.5 * 10**-places + 1e-9 * abs(figure)


@pytest.mark.parametrize("symbol", printed("A01"))
def test_a01_standard_ultimate_life_table(symbol: str) -> None:
    figure = printed("A01")[symbol]
    streams, age = in_notation(symbol)
    places = 6 if symbol.startswith("q") else 4 if "adue" in symbol else 5
    # The last two are products of printed entries: 0.36663 x 14.9041, and 0.12106 - 0.36663 x 0.29028.
    products = {"20|adue_40": 14.91 * 0.5e-5 + 0.367 * 0.5e-4, "A1_40:20": 0.5e-5 * (1 + 0.291 + 0.367)}
    tolerance = products.get(symbol, half_a_unit(figure, places))
    interest = 0.0 if symbol.startswith("q") else RATE
    assert value(streams, STANDARD, interest, age) == pytest.approx(figure, abs=tolerance)


def test_a03_standard_select_survival_model() -> None:
    figures = printed("A03")
    assert value([annuity(0, 20)], SELECT, RATE, 45) == pytest.approx(figures["adue_[45]:20"], abs=0.000005)
    assert Law.model_validate(STANDARD).force(49.95) == pytest.approx(figures["mu_49.95"], abs=0.5e-7)


@pytest.mark.parametrize("age", [20, 30, 35, 40, 45])
def test_a04_illustrative_life_table(age: int) -> None:
    figures = printed("A04")
    single = value([insurance()], ILLUSTRATIVE, 0.06, age)
    double = value([insurance()], ILLUSTRATIVE, 1.06**2 - 1, age)
    found = {
        f"adue_{age}": (value([annuity()], ILLUSTRATIVE, 0.06, age), 4),
        f"1000A_{age}": (1000 * single, 2),
        f"1000A2_{age}": (1000 * double, 2),
        # The table prints 201.20 per 1000; the sixth place of A_45 was added by the forum that quotes it.
        f"A_{age}": (single, 5),
        f"A2_{age}": (double, 5),
        f"1000q_{age}": (1000 * value([insurance(0, 1)], ILLUSTRATIVE, 0.0, age), 2),
        **{f"1000_{n}E{age}": (1000 * value([once(n)], ILLUSTRATIVE, 0.06, age), 2) for n in (5, 10, 20)},
        f"10E{age}": (value([once(10)], ILLUSTRATIVE, 0.06, age), 5),
    }
    checked = [name for name in found if name in figures]
    assert checked
    for name in checked:
        value_found, places = found[name]
        assert value_found == pytest.approx(figures[name], abs=half_a_unit(figures[name], places)), name


@pytest.mark.parametrize("age", [30, 35, 40, 110])
def test_a04_numbers_living(age: int) -> None:
    # l_20 is printed as a whole number itself; its half unit scales with survival.
    figures = printed("A04")
    living = figures["l_20"] * value([once(age - 20)], ILLUSTRATIVE, 0.0, 20)
    assert living == pytest.approx(figures[f"l_{age}"], abs=1.0)


def test_a04_last_ages() -> None:
    figures = printed("A04")
    assert value([insurance(0, 1)], ILLUSTRATIVE, 0.0, 110) == pytest.approx(figures["q_110"], abs=0.000005)
    # The law goes on beyond 110; if everybody died by 111 it would be about 0.929.
    assert value([insurance()], ILLUSTRATIVE, 0.06, 110) == pytest.approx(figures["A_110"], abs=0.000005)


def test_a07_deferred_annuity_on_am92() -> None:
    ultimate = {"file": str(FOLDER / "t2360.xml"), "table": 2}
    found = value([annuity(10, 35)], ultimate, 0.04, 40)
    # Printed 10.104 from rounded factors (10.104 = 1366.61 / 2052.96 x (17.444 - 0.26570 x 8.524)).
    assert found == pytest.approx(printed("A07")["EPV"], abs=0.001)


AM92 = {"file": str(FOLDER / "t2360.xml"), "select_by": "attained age"}


# Formulae and Tables for Examinations (Faculty and Institute of Actuaries, 2002): from memory, not read.
@pytest.mark.parametrize("symbol", [symbol for symbol in printed("A09") if "[" in symbol])
def test_a09_am92_select(symbol: str) -> None:
    rate, plain = symbol.split(" ")
    age, years = (int(part) for part in [*re.findall(r"\d+", plain), "0"][:2])
    streams = [annuity(0, years or None)] if "adue" in plain else [insurance(0, years or None)]
    if years and "adue" not in plain:
        streams.append(once(years))  # an endowment assurance
    places = 3 if "adue" in plain else 5
    figure = printed("A09")[symbol]
    found = value(streams, AM92, int(rate[0]) / 100, age)
    assert found == pytest.approx(figure, abs=half_a_unit(figure, places))


@pytest.mark.parametrize(("case", "number", "i"), [("A16-WM", 589, 0.1), ("A16-NWF", 592, 0.04), ("A16-F", 588, 0.1)])
@pytest.mark.parametrize("age", [0, 10, 55, 65])
def test_a16_annuities_of_united_states_life_tables(case: str, number: int, i: float, age: int) -> None:
    # The study used whole-number l_x, the archive holds q_x to 5 places; that moves a_x by up to 0.0003.
    rules = [{"table": {"file": str(FOLDER / f"t{number}.xml")}, "close": True}]
    found = value([annuity(paid="arrears")], rules, i, age)
    assert found == pytest.approx(printed(case)[f"a_{age}"], abs=0.0003)


def test_b24_makeham_deferred_annuity() -> None:
    law = {"law": "Makeham", "A": 0.0002, "B": 3e-6, "c": 1.1}
    assert nearest_is_key("B24", value([annuity(1, 3, paid="arrears")], law, 0.05, 70), "1|a_70:2")


def test_b25_gompertz_term_insurance() -> None:
    law = {"law": "Gompertz", "B": 5e-6, "c": 1.2}
    assert nearest_is_key("B25", value([insurance(0, 2)], law, 0.03, 50), "A")
