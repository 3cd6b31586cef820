"""Named sets of shocks as data, and the figures of capital that they lead to, against hand computation."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

from assumptions.basis import prepare_basis
from assumptions.shock_sets import Correlation, Risk, ShockSet, expanded
from assumptions.shocks import Shock
from projection.capital import (
    after_leaving,
    combined,
    leaving_strain,
    revision_strain,
    rises,
    risk_figure,
    risk_figures,
)
from projection.documents import DocumentError, check_document, named_sets, read_shock, read_shocks

BASIS = {
    "title": "Invented",
    "mortality": {"rule": [{"table": {"law": "Gompertz", "B": 2.7e-6, "c": 1.124}}]},
    "interest": {"rule": [{"flat": 0.04}]},
}


def test_the_life_stresses_are_those_of_the_regulation() -> None:
    """Delegated Regulation (EU) 2015/35, Articles 137 to 143; 139 from memory."""
    held = {shock.name: shock.change for shock in read_shocks("eu-life-2015").shock}
    amounts = {name: [(change.what, change.how, change.amount) for change in changes] for name, changes in held.items()}
    assert amounts == {
        "mortality": [("mortality", "relative", 0.15)],
        "longevity": [("mortality", "relative", -0.2)],
        "disability": [
            ("disability", "relative", 0.35),
            ("disability", "relative", 0.25),
            ("recovery", "relative", -0.2),
        ],
        "lapse up": [("lapse", "relative", 0.5)],
        "lapse down": [("lapse", "relative", -0.5)],
        "expenses": [("expenses", "relative", 0.1), ("inflation", "absolute", 0.01)],
        "catastrophe": [("mortality", "absolute", 0.0015)],
    }
    assert held["lapse down"][0].at_most == 0.2
    assert held["catastrophe"][0].for_months == held["disability"][0].for_months == 12
    assert held["disability"][1].from_months == 12
    life = read_shocks("eu-life-2015")
    assert [(one.name, one.share) for one in life.leaving] == [("mass lapse", 0.4)]
    assert [(one.name, one.share) for one in life.revision] == [("revision", 0.03)]


def test_the_correlations_are_those_of_article_136() -> None:
    names = ["mortality", "longevity", "disability", "expenses", "revision", "lapse", "catastrophe"]
    expected = [  # Delegated Regulation (EU) 2015/35, Article 136, in the order above
        [1, -0.25, 0.25, 0.25, 0, 0, 0.25],
        [-0.25, 1, 0, 0.25, 0.25, 0.25, 0],
        [0.25, 0, 1, 0.5, 0, 0, 0.25],
        [0.25, 0.25, 0.5, 1, 0.5, 0.5, 0.25],
        [0, 0.25, 0, 0.5, 1, 0, 0],
        [0, 0.25, 0, 0.5, 0, 1, 0.25],
        [0.25, 0, 0.25, 0.25, 0, 0.25, 1],
    ]
    life = read_shocks("eu-life-2015")
    assert sorted(names) == sorted(risk.name for risk in life.risk)
    found = np.eye(7)
    for one in life.correlation:
        i, j = (names.index(name) for name in one.between)
        found[i, j] = found[j, i] = one.figure
    np.testing.assert_array_equal(found, expected)
    assert np.linalg.eigvalsh(found).min() > 0


def test_every_named_set_bears_a_date_and_a_citation() -> None:
    assert named_sets() == ["eu-interest-2015", "eu-life-2015", "interest-by-mortality", "key-rates", "reporting-2005"]
    for name in named_sets():
        shocks = read_shocks(name)
        assert shocks.title
        assert shocks.effective
        assert shocks.reference
        assert shocks.effective.isoformat() in shocks.dated
        assert shocks.reference in shocks.dated
        assert all(one.name_in_words for one in expanded(shocks))


def test_reporting_set() -> None:
    changes = [(one.what, one.how, one.amount) for shock in read_shocks("reporting-2005").shock for one in shock.change]
    assert changes == [  # from memory, as its reference says
        ("interest", "absolute", 0.01),
        ("interest", "absolute", -0.01),
        ("expenses", "relative", -0.1),
        ("lapse", "relative", -0.1),
        ("mortality", "relative", -0.05),
    ]


def test_a_grid_holds_every_cell_and_no_change() -> None:
    shocks = expanded(read_shocks("interest-by-mortality"))
    assert len(shocks) == 25 + 4
    assert shocks[12].title == "no change"
    assert all(change.neutral for change in shocks[12].change)
    assert shocks[4].title == "interest -200 bp, mortality +20 %"
    assert [one.title for one in shocks[25:]] == ["lapse -20 %", "lapse +20 %", "expenses -10 %", "expenses +10 %"]
    assert len({one.name for one in shocks}) == len(shocks)


def test_a_set_of_another_basis_is_an_error(tmp_path: Path) -> None:
    basis = prepare_basis(BASIS)
    path = tmp_path / "set.toml"
    path.write_text(f'title = "Ours"\nbasis = "{basis.digest}"\n')
    assert read_shocks(path, basis).basis == basis.digest
    other = prepare_basis({**BASIS, "interest": {"rule": [{"flat": 0.05}]}})
    said = rf"set.toml: key 'basis': 'Ours' was made for the basis .*{other.digest[:12]}"
    with pytest.raises(DocumentError, match=said):
        read_shocks(path, other)
    path.write_text(f'basis = "{basis.digest}"\n[[shock]]\nname = "x"\nbasis = "{other.digest}"\n')
    with pytest.raises(DocumentError, match="'no change' was made for"):
        read_shocks(path, basis)
    path.write_text(f'title = "One"\nbasis = "{other.digest}"\n')
    assert read_shock(path, other).title == "One"
    with pytest.raises(DocumentError, match="'One' was made for"):
        read_shock(path, basis)
    with pytest.raises(DocumentError, match="the named sets are eu-interest-2015, eu-life-2015"):
        read_shocks("eu-life-2016")


@pytest.mark.parametrize(
    ("content", "fault"),
    [
        ({"basis": "abc"}, "key 'basis'"),
        ({"risk": [{"name": "r", "shocks": ["x"]}]}, "there is no shock 'x'"),
        ({"shock": [{"name": "x"}, {"name": "x"}]}, "'x' is there 2 times"),
        ({"correlation": [{"between": ["a", "b"], "figure": 0.5}]}, "there is no risk 'a'"),
        ({"key_rates": [{"name": "k", "years": [1, 5, 3], "shift": 0.01}]}, "ascend"),
        ({"grid": [{"name": "g", "axes": []}]}, "did you mean 'axis'"),
    ],
)
def test_sets_refused(content: dict[str, object], fault: str) -> None:
    with pytest.raises(DocumentError, match=fault):
        check_document(content, ShockSet, "set.toml")


def test_the_test_per_policy() -> None:
    base, shocked = np.array([100, 200, 300]), np.array([110, 190, 330])
    np.testing.assert_array_equal(rises(base, shocked), [10, -10, 30])
    np.testing.assert_array_equal(rises(base, shocked, "where the reserve rises"), [10, 0, 30])
    losses = {"up": rises(base, shocked), "down": rises(shocked, base)}
    # By hand: up 10 + 30 = 40, down 10; all policies together 30 and -30.
    both = ["up", "down"]
    assert risk_figure(Risk(name="lapse", shocks=both, counts="where the reserve rises"), losses) == 40
    assert risk_figure(Risk(name="lapse", shocks=both), losses) == 30
    assert risk_figure(Risk(name="lapse", shocks=["down"]), losses) == 0


def test_leaving_and_revision() -> None:
    value, surrender = np.array([1000.0, 500.0]), np.array([900.0, 650.0])
    np.testing.assert_allclose(after_leaving(value, surrender, 0.4), [960, 560])
    np.testing.assert_allclose(leaving_strain(value, surrender, 0.4), [0, 60])
    np.testing.assert_allclose(leaving_strain(value, surrender, 0.4, "all policies"), [-40, 60])
    np.testing.assert_allclose(after_leaving(value, surrender, 0.0), value)
    minor = leaving_strain(np.array([100, 7]), np.array([105, 8]), 0.5)
    assert minor.dtype == np.int64
    assert minor.tolist() == [2, 0]
    np.testing.assert_allclose(revision_strain(np.array([1000.0]), 0.03), [30])


def test_the_combined_figure_by_hand() -> None:
    """sqrt(100^2 + 80^2 + 50^2 - 2 x 0.25 x 100 x 80 + 2 x 0.25 x 80 x 50), Article 136 for the three."""
    life = read_shocks("eu-life-2015")
    figures = {"mortality": 100.0, "longevity": 80.0, "lapse": 50.0}
    by_hand = math.sqrt(10_000 + 6_400 + 2_500 - 4_000 + 2_000)  # = sqrt(16 900) = 130
    assert by_hand == 130
    assert combined(figures, life.correlation) == pytest.approx(130, rel=1e-15)
    assert combined(figures, []) == pytest.approx(math.sqrt(18_900))
    whole = [Correlation(between=["a", "b"], figure=1.0)]
    assert combined({"a": 3.0, "b": 4.0}, whole) == 7
    assert combined({}, whole) == 0
    impossible = [Correlation(between=[x, y], figure=-1.0) for x, y in (("a", "b"), ("b", "c"), ("a", "c"))]
    with pytest.raises(ValueError, match="not correlations"):
        combined({"a": 1.0, "b": 1.0, "c": 1.0}, impossible)


def test_all_figures_of_a_set() -> None:
    life = read_shocks("eu-life-2015")
    names = [*(one.name for one in life.shock), *(one.name for one in (*life.leaving, *life.revision))]
    losses = {name: np.array([10, -4]) for name in names}
    tested = dict.fromkeys(("mortality", "longevity", "lapse", "catastrophe"), 10.0)
    assert risk_figures(life, losses) == tested | dict.fromkeys(("disability", "expenses", "revision"), 6.0)
    assert Shock(title="x").name_in_words == "x"
