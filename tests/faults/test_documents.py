"""Documents and tables that are wrong: each error names file, key, value and remedy in plain words."""

# One case is one line: what is changed, and what must be said of it.
# ruff: noqa: E501

from __future__ import annotations

import pyarrow.parquet as pq
import pytest
from fault_office import Office

RUN = "month-end.toml"
BASIS = "bases/statutory.toml"
OTHER_BASIS = "bases/best_estimate.toml"
DESIGN = "designs/larboard.toml"
WOMEN = "tables/assured_f.csv"

UNKNOWN_KEYS = [
    (RUN, "group_by ", "group_bye ", "key 'group_bye' is not known; did you mean 'group_by'?"),
    (RUN, "title ", "remark ", "key 'remark' is not known; known here: basis, currency, decimals, designs"),
    (DESIGN, "while ", "whyle ", "stream 1 ('premium'): key 'whyle' is not known; did you mean 'while'?"),
    (DESIGN, "{ share", "{ shares", "stream 3 ('commission'), pattern 2: key 'shares' is not known; did you mean 'share'?"),
    (BASIS, "[interest]", "[intrest]", "key 'intrest' is not known; did you mean 'interest'?"),
    (BASIS, "added_years", "aded_years", "mortality, rule 1: key 'aded_years' is not known; did you mean 'added_years'?"),
    (BASIS, "first_age", "fist_age", "mortality, rule 5, table: key 'fist_age' is not known; did you mean 'first_age'?"),
    (BASIS, "select_by", "selectby", "mortality, rule 1, table: key 'selectby' is not known; did you mean 'select_by'?"),
    (BASIS, "premium_frequency = 12", "premium_frequency = { frm = 12 }", "lapse, rule 1, for: key 'frm' is not known; did you mean 'from'?"),
    (BASIS, "later_years = 30", "late_years = 30", "expense 1 ('administration'), rule 1: key 'late_years' is not known; did you mean 'later_years'?"),
    (BASIS, "delay_months", "delay", "claims, paid: key 'delay' is not known; known here: delay_months"),
]  # fmt: skip

OUT_OF_RANGE = [
    (RUN, "0.15", "2.0", "key 'exceptions_limit' is 2.0; it should be less than or equal to 1"),
    (RUN, "due ", "decimals = 9\ndue ", "key 'decimals' is 9; it should be less than or equal to 4"),
    (RUN, "due ", "sample = 0\ndue ", "key 'sample' is 0; it should be greater than or equal to 1"),
    (RUN, '"month"', '"week"', "key 'step' is 'week'; it should be 'month' or 'year'"),
    (RUN, '"settled"', '"paid"', "key 'due' is 'paid'; it should be 'settled' or 'outstanding'"),
    (DESIGN, '"premium_frequency"', "3", "stream 1 ('premium'): key 'a_year': 3 payments a year are not known; the choice is 1, 2, 4 and 12"),
    (DESIGN, "0.025", "-0.025", "stream 3 ('commission'), pattern 2: key 'share' is -0.025; it should be greater than or equal to 0"),
    (BASIS, "= 0.90", "= -0.90", "mortality, rule 5: key 'multiple' is -0.9; it should be greater than or equal to 0"),
    (BASIS, "= 0.0250", "= 2.50", "interest: rule 1: flat is 2.5; a yearly rate must lie above -0.5 and not above 1"),
    (BASIS, "= 0.0250", "= nan", "interest: rule 1: flat is nan; a yearly rate must lie above -0.5 and not above 1"),
    (BASIS, "[0.0]", "[0.5, 1.5]", "lapse, rule 7: key 'rates': the rate of policy year 2 is 1.5; it must lie between 0 and 1"),
    (BASIS, "[0.0]", "[]", "lapse, rule 7: key 'rates' is an empty list; it should be a list of at least one item"),
    (BASIS, '"last birthday"', '"last birthay"', "mortality: key 'age' is 'last birthay'; it should be 'exact', 'last birthday'"),
    (BASIS, '"Makeham"', '"Makehan"', "mortality, rule 5, table: key 'law' is 'Makehan'; it should be 'de Moivre', 'Gompertz' or 'Makeham'"),
    (BASIS, '"entry age"', '"entry"', "mortality, rule 1, table: key 'select_by' is 'entry'; it should be 'entry age' or 'attained age'"),
    (BASIS, "delay_months = 1", "delay_months = 99", "claims, paid: key 'delay_months' is 99; it should be less than or equal to 60"),
]  # fmt: skip

WRONG_TYPES = [
    (RUN, "2026-11-30", '"30.11.2026"', "key 'valuation_date' is '30.11.2026'; it should be a date, written like 2026-11-30"),
    (RUN, "2026-11-30", "20261130", "key 'valuation_date' is 20261130; it should be a date, written like 2026-11-30"),
    (RUN, "2026-11-30", "2026-11-30T12:00:00", "key 'valuation_date' is 2026-11-30 12:00:00; it should be a date"),
    (RUN, '["product", "sex"]', '"product"', "key 'group_by' is 'product'; it should be a list in square brackets"),
    (RUN, '["product", "sex"]', "[1]", "group_by 1 is 1; it should be text in quotes"),
    (RUN, '"inforce"', "7", "key 'extract' is 7; it should be text in quotes"),
    (RUN, "0.15", '"0.15"', "key 'exceptions_limit' is '0.15'; it should be a number"),
    (DESIGN, '"sum_assured"', "true", "stream 2 ('death benefit'): key 'amount' is true; it should be a number or text in quotes"),
    (DESIGN, '"premium_frequency"', "12.5", "stream 1 ('premium'): key 'a_year' is 12.5; it should be a whole number or text in quotes"),
    (BASIS, "= 0.0250", "= true", "interest, rule 1: key 'flat' is true; it should be a number"),
    (BASIS, "= 0.0250", '= "2.5 %"', "interest, rule 1: key 'flat' is '2.5 %'; it should be a number"),
    (BASIS, "= 0.90", "= [0.90]", "mortality, rule 5: key 'multiple' is a list; it should be a number"),
    (BASIS, "added_years = 4", 'added_years = "four"', "mortality, rule 1: key 'added_years' is 'four'; it should be a whole number"),
    (BASIS, "from = 2026-01-01", 'from = "soon"', "expense 1 ('administration'), inflation: key 'from' is 'soon'; it should be a date"),
    (BASIS, "premium_frequency = 12", 'premium_frequency = { from = "x" }', "lapse, rule 1, for: key 'from' is 'x'; it should be a whole number or a number or a date"),
]  # fmt: skip

DO_NOT_FIT = [
    (DESIGN, 'of        = "premium"', 'of        = "premum"', f"{DESIGN}: stream 'commission' is a share of 'premum', which is not there"),
    (DESIGN, '"LARBOARD"', '"EBBSTONE"', f"{DESIGN}: key 'code': 'EBBSTONE' is already the code of another design in"),
    (DESIGN, '"sum_assured"', '"sum_asured"', "there is no column 'sum_asured'; did you mean 'sum_assured'?"),
    (RUN, '"sex"]', '"sax"]', "there is no column 'sax'; did you mean 'sex'?"),
    (RUN, '"designs"', '"desings"', "desings: there is no such file"),
    (RUN, "bases/statutory", "bases/statutry", "bases/statutry.toml: there is no such file"),
    (BASIS, "premium_frequency = 12", "premum_frequency = 12", "there is no column 'premum_frequency'; did you mean 'premium_frequency'?"),
    (BASIS, "premium_frequency = 12", 'premium_frequency = "monthly"', f"{BASIS}: lapse, rule 1, for: key 'premium_frequency' is 'monthly', but the extract's column holds numbers"),
    (BASIS, "premium_frequency = 12", "premium_frequency = true", f"{BASIS}: lapse, rule 1, for: key 'premium_frequency' is true, but the extract's column holds numbers"),
    (BASIS, 'policy_class = "rated"', "policy_class = 4", f"{BASIS}: mortality, rule 1, for: key 'policy_class' is 4, but the extract's column holds text"),
    (BASIS, 'policy_class = "rated"', "policy_class = { to = 4 }", f"{BASIS}: mortality, rule 1, for: key 'policy_class' is a band with the bound 4, but"),
    (BASIS, 'until    = "premium_years"', 'until    = "region"', "column 'region' is of type string; it should hold numbers"),
    (BASIS, 'age       = "last birthday"', 'age = "exact"', f"{BASIS}: mortality, rule 1: select rates of file='../tables/assured_f.csv'"),
    (BASIS, "../tables/assured_f.csv", "../tables/asured_f.csv", "tables/asured_f.csv: cannot be read: No such file or directory"),
    (BASIS, 'select_by = "entry age"', 'column = "ultimat"', "assured_f.csv: no column 'ultimat', only age, select_0, select_1, ultimate; did you mean 'ultimate'?"),
    (WOMEN, "0.0002341", "1.2341", "assured_f.csv, line 2, column 'select_0': rate 1.2341 does not lie between 0 and 1"),
    (WOMEN, "0.0002341", "abc", "assured_f.csv, line 2: column 'select_0': 'abc' is no number; write a figure"),
    (WOMEN, "0.0002341", "nan", "assured_f.csv, line 2"),
    ("tables/lapses_term.csv", "0.120", "1.120", "lapses_term.csv, line 2, column 'rate': rate 1.12 does not lie between 0 and 1"),
]  # fmt: skip

IN_THE_OTHER_BASIS = [
    ("tables/annuitants.xml", "<XTbML>", '<!DOCTYPE XTbML [<!ENTITY a "b">]>\n<XTbML>', "annuitants.xml: document types, entities and external references are not read (DTD); remove them"),
    ("tables/annuitants.xml", "</XTbML>", "", "annuitants.xml"),
    ("tables/spot_november_2026.csv", "0.0215", "-1.5", "spot_november_2026.csv, line 2: rate -1.5 must lie above -0.5, up to 1; 3 % is 0.03"),
    (OTHER_BASIS, '"Annuitant women"', '"Anuitant women"', "annuitants.xml: no table with number or title 'Anuitant women'; there are: 1 'Annuitant women'"),
]  # fmt: skip


@pytest.mark.parametrize(("name", "old", "new", "said"), [*UNKNOWN_KEYS, *OUT_OF_RANGE, *WRONG_TYPES])
def test_keys_and_values(office: Office, name: str, old: str, new: str, said: str) -> None:
    office.replace(name, old, new)
    message = office.refused()
    assert f"{office.folder / name}: {said}" in message
    # What was changed in one place has one fault, or the missing key beside the unknown one.
    faults = message.strip().splitlines()
    assert all("is missing" in fault for fault in faults if said not in fault), message


@pytest.mark.parametrize(("name", "old", "new", "said"), DO_NOT_FIT)
def test_parts_that_do_not_fit_together(office: Office, name: str, old: str, new: str, said: str) -> None:
    office.replace(name, old, new)
    assert said in office.refused()


@pytest.mark.parametrize(("name", "old", "new", "said"), IN_THE_OTHER_BASIS)
def test_tables_of_the_other_basis(office: Office, name: str, old: str, new: str, said: str) -> None:
    office.replace(RUN, "bases/statutory", "bases/best_estimate")
    office.replace(name, old, new)
    assert said in office.refused()


@pytest.mark.parametrize("name", [RUN, BASIS, DESIGN])
def test_what_is_not_toml(office: Office, name: str) -> None:
    office.append(name, "x = = 1")
    lines = len((office.folder / name).read_text().splitlines())
    message = office.refused()
    assert f"{office.folder / name}: not valid TOML: Invalid value (at line {lines}, column" in message
    (office.folder / name).write_bytes(b'title = "\xff\xfe"\n')
    assert f"{office.folder / name}: not valid TOML: " in office.refused()


def test_a_missing_key_is_named(office: Office) -> None:
    office.replace(RUN, "valuation_date", "# valuation_date")
    assert office.refused() == f"{office.run}: key 'valuation_date' is missing\n"


def test_every_fault_is_said_at_once(office: Office) -> None:
    office.replace(RUN, '"month"', '"week"')
    office.replace(RUN, "0.15", "2.0")
    assert len(office.refused().strip().splitlines()) == 2


def test_documents_do_not_run_as_code(office: Office) -> None:
    office.replace(RUN, "Month end", "{{ 7 * 7 }} ${HOME} `id` =1+1 <b>")
    assert office.reserve("--no-workbook").code == 0
    page = (office.out / "report.html").read_text()
    assert "{{ 7 * 7 }} ${HOME} `id` =1+1 &lt;b&gt;" in page


def test_the_limit_on_exceptions_stops_the_run(office: Office) -> None:
    office.replace(RUN, "0.15", "0.001")
    said = office.reserve()
    assert said.code == 1
    assert "of 300 policies are exceptions (" in said.err
    assert "more than the 'exceptions_limit' of 0.10% allows" in said.err
    assert "mend the extract or raise the limit" in said.err
    assert not office.out.parent.exists()
    checked = office.check()
    assert checked.code == 2
    assert "The run would stop." in checked.out


def test_policies_that_no_rule_fits_are_exceptions(office: Office) -> None:
    table = office.extract()
    office.change("sex", 5, "X")
    office.replace(RUN, "0.15", "0.5")
    assert office.reserve("--no-workbook").code == 0
    said = office.command("explain", str(office.run), table.column("policy_id")[5].as_py())
    assert said.code == 2
    assert "is not valued: no rule fits: " in said.err
    checked = office.check()
    assert "no rule fits: 1 policy" in checked.out
    assert "a rule of mortality must fit" in checked.out


def test_exit_codes(office: Office) -> None:
    assert office.check().code == 0
    assert office.reserve("--no-workbook").code == 0
    assert office.reserve("--no-workbook").code == 2
    assert office.command("verify", str(office.out)).code == 0
    (office.out / "totals.parquet").write_bytes(b"")
    assert office.command("verify", str(office.out)).code == 1
    assert office.command("verify", str(office.folder)).code == 2
    assert office.command("explain", str(office.run), "nobody").code == 2
    assert office.command("reserve").code == 2


def test_what_a_run_lists_as_an_exception_has_no_working(office: Office) -> None:
    """The twin alone would value some of them: only the checks know a column's range."""
    assert office.reserve("--no-workbook").code == 0
    exceptions = pq.read_table(office.out / "exceptions.parquet").to_pylist()
    assert len({row["reason"] for row in exceptions}) == 13
    for row in exceptions:
        said = office.command("explain", str(office.run), row["policy_id"])
        assert said.code == 2, row
        assert f"policy '{row['policy_id']}' is not valued: " in said.err
        assert said.out == ""
