"""Yield curves, improvement and inflation with figures that make no sense: file, key, value and remedy in plain words.

And with figures that do, the working of a policy as text and as a workbook.
"""

# One case is one line: what a rule holds, and what must be said of it.
# ruff: noqa: E501

from __future__ import annotations

import zipfile
from pathlib import Path

import pytest
from fault_office import Office

BASIS = "bases/statutory.toml"

CURVES = [
    ("svensson = { beta0 = 0.03, tau1 = 0.0 }", "interest, rule 1, svensson: key 'tau1' is 0.0; it should be greater than 0"),
    ("svensson = { beta0 = 0.03, tau1 = nan }", "interest, rule 1, svensson: key 'tau1' is nan"),
    ("svensson = { beta0 = 0.03 }", "interest, rule 1, svensson: key 'tau1' is missing"),
    ("svensson = { beta0 = 0.03, tau1 = 1.0, tau3 = 2.0 }", "interest, rule 1, svensson: key 'tau3' is not known; did you mean 'tau2'?"),
    ("svensson = { beta0 = -0.4, beta1 = -0.9, tau1 = 50.0 }", "interest, rule 1: key 'svensson' gives the spot rate -1.298 at 0.25 years; it must lie above -0.5: correct beta0"),
    ("svensson = 0.03", "interest, rule 1: key 'svensson' is 0.03; it should be a table of keys and values"),
    ("smith_wilson = { ultimate = 0.03, alpha = 0.1 }", "interest, rule 1, smith_wilson: key 'spot' is missing"),
    ('smith_wilson = { spot = { "1" = 0.02 }, ultimate = 0.03 }', "needs one of 'alpha' and 'convergence'"),
    ('smith_wilson = { spot = { "x" = 0.02 }, ultimate = 0.03, alpha = 0.1 }', "smith_wilson: key 'spot': maturity 'x' is no number of years above 0; write them like"),
    ('smith_wilson = { spot = { "nan" = 0.02 }, ultimate = 0.03, alpha = 0.1 }', "key 'spot': maturity 'nan' is no number of years above 0"),
    ('smith_wilson = { spot = { "1" = 0.02, "1.0" = 0.02 }, ultimate = 0.03, alpha = 0.1 }', "maturity '1.0' is there twice; give each once"),
    ('smith_wilson = { spot = { "1" = "2 %" }, ultimate = 0.03, alpha = 0.1 }', "the spot rate at maturity '1' is '2 %'; it should be a number"),
    ("smith_wilson = { spot = {}, ultimate = 0.03, alpha = 0.1 }", "interest, rule 1: key 'spot' is empty; a spot curve needs at least one maturity"),
    ('smith_wilson = { spot = { "1" = 2.0 }, ultimate = 0.03, alpha = 0.1 }', "interest, rule 1: key 'spot': the rate at maturity 1 is 2; a yearly rate must lie above -0.5 and not above 1"),
    ('smith_wilson = { spot = { "1" = 0.02, "60" = 0.03 }, ultimate = 0.03, convergence = 40.0 }', "interest, rule 1: key 'convergence' is 40; it must lie beyond the last spot rate, at 60 years"),
    ('smith_wilson = { spot = { "1" = 0.02, "20" = 0.03 }, ultimate = 0.9, convergence = 20.1, tolerance = 1e-12 }', "interest, rule 1: key 'tolerance' is 1e-12; no 'alpha' up to 2 comes so near"),
    ('smith_wilson = { spot = { "1" = 0.9, "2" = -0.45, "3" = 0.9 }, ultimate = 0.03, alpha = 0.1 }', "interest, rule 1: key 'smith_wilson' gives no discount factor above 0 for 3.25 years; correct the spot rates"),
    ('smith_wilson = { spot = { "1" = 0.02, "2" = 0.03, "400" = 0.03 }, ultimate = 0.03, alpha = 0.1 }', "maturities of a Smith-Wilson curve are at most 150 years"),
    ('smith_wilson = { spot = { "1" = 0.02, "1.0000001" = 0.03 }, ultimate = 0.03, alpha = 0.1 }', "a day or more apart; leave some out"),
    ('smith_wilson = { spot = "nowhere.csv", ultimate = 0.03, alpha = 0.1 }', "nowhere.csv: cannot be read: No such file or directory"),
    ('spot = { "x" = 0.02 }', "interest, rule 1: key 'spot': maturity 'x' is no number of years above 0"),
    ('spot = { "-1" = 0.02 }', "interest, rule 1: key 'spot': maturity '-1' is no number of years above 0"),
]  # fmt: skip

IMPROVEMENTS = [
    ("{ }", "mortality, rule 5, improvement: key 'base_year' is missing"),
    ("{ base_year = 2015 }", "an improvement needs one of 'table' and 'rate'"),
    ("{ base_year = 2015, rate = 0.3 }", "improvement: key 'rate' is 0.3; it should be less than or equal to 0.2"),
    ("{ base_year = 2015, rate = nan }", "improvement: key 'rate' is nan"),
    ("{ base_year = 15, rate = 0.02 }", "improvement: key 'base_year' is 15; it should be greater than or equal to 1900"),
    ('{ base_year = 2015, table = "nowhere.csv" }', "nowhere.csv: cannot be read: No such file or directory"),
    ("{ base_year = 2015, table = 3 }", "improvement: key 'table' is 3; it should be text in quotes or a table of keys and values"),
    ('{ base_year = 2015, table = { file = "x.xml" } }', "improvement, table: key 'table' is missing"),
    ("{ base_year = 2015, rate = 0.01, long_term = { rate = 0.5, years = 10 } }", "improvement, long_term: key 'rate' is 0.5"),
    ("{ base_year = 2015, rate = 0.01, long_term = { rate = 0.01, years = 0 } }", "improvement, long_term: key 'years' is 0; it should be greater than or equal to 1"),
    ('{ base_year = 2015, rate = 0.01, holds = "factors" }', "improvement: key 'holds' is 'factors'; it should be 'yearly improvements'"),
    ('{ base_year = 2015, table = "../tables/assured_m.csv" }', "assured_m.csv: no column 'rate', only age, select_0, select_1, ultimate"),
    ('{ base_year = 2015, table = "../tables/annuitants.xml" }', "annuitants.xml: 2 tables; name one"),
    ('{ base_year = 2015, table = { file = "../tables/annuitants.xml", table = 1 } }', "holds no scale of improvement; name another file"),
]  # fmt: skip


@pytest.mark.parametrize(("curve", "said"), CURVES)
def test_curves(office: Office, curve: str, said: str) -> None:
    office.replace(BASIS, "flat      = 0.0250", curve)
    check(office, said)


@pytest.mark.parametrize(("improvement", "said"), IMPROVEMENTS)
def test_improvements(office: Office, improvement: str, said: str) -> None:
    office.replace(BASIS, "= 0.90", f"= 0.90\nimprovement = {improvement}")
    check(office, said)


def check(office: Office, said: str) -> None:
    """Check and explain refuse the document in the same words, and name its file."""
    policy = office.extract().column("policy_id")[0].as_py()
    for found in (office.check(), office.command("explain", str(office.run), policy)):
        assert found.code == 2
        assert "Traceback" not in found.err
        assert f"{office.folder / BASIS}: " in found.err
        assert said in found.err


RIGHT = [
    "svensson = { beta0 = 0.03, beta1 = -0.02, beta2 = 0.01, beta3 = 0.01, tau1 = 1.5, tau2 = 9.0 }",
    'smith_wilson = { spot = { "1" = 0.02, "20" = 0.03 }, ultimate = 0.034, convergence = 60.0 }',
    'smith_wilson = { spot = "../tables/spot_november_2026.csv", ultimate = 0.034, alpha = 0.12 }',
]


@pytest.mark.parametrize("curve", RIGHT)
def test_the_working_by_a_curve_and_an_improvement(office: Office, tmp_path: Path, curve: str) -> None:
    office.replace(BASIS, "flat      = 0.0250", curve)
    office.replace(BASIS, "flat      = 0.0225", curve)
    (office.folder / "tables" / "scale.csv").write_text("age,2020,2021\n20,0.01,0.02\n21,0.02,0.01\n")
    scale = '{ table = "../tables/scale.csv", base_year = 2019, long_term = { rate = 0.01, years = 10 } }'
    office.replace(BASIS, "= 0.90", f"= 0.90\nimprovement = {scale}")
    office.replace(BASIS, "inflation = { rate = 0.025,", "inflation = { rates = [0.03, 0.02],")
    assert office.check().code == 0
    form = curve.split(" ")[0].replace("smith_wilson", "Smith-Wilson")
    for product in ("MARRAM", "LARBOARD"):
        table = office.extract()
        named = [row for row in table.to_pylist() if row["product"] == product and row["status"] == "in force"]
        for row in named:
            text = office.command("explain", str(office.run), row["policy_id"])
            if text.code == 0:
                break
        assert form in text.out
        out = tmp_path / f"{product}.xlsx"
        assert office.command("explain", str(office.run), row["policy_id"], "--out", str(out)).code == 0
        with zipfile.ZipFile(out) as book:
            held = "".join(book.read(name).decode() for name in book.namelist() if name.endswith(".xml"))
        assert curve.split(" ")[0].replace("_", " ") in held.replace("_", " ")
