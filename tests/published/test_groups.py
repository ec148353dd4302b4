"""Published models and check values with groups of hosts: vaccination, core groups, contacts, given matrices."""

from __future__ import annotations

import math

import pytest

from tests.published.models import Model, close, matrix

# van den Driessche & Watmough (2002) Math. Biosci. 180:29-48, section 4.2 (the abstract names the multigroup model; its
# equations are from memory). Rates depend on densities: no N. The vaccinated and recovered share R.
MULTIGROUP_ARROWS = (
    "S->I t: {incidence}; I->R x: g*I; S->R x: th*S; R->S x: s*R; 0->S x: (1-p)*b; 0->R x: p*b"
    "; S->0 x: d*S; R->0 x: d*R; I->0 x: (d+e)*I"
)
MULTIGROUP_VALUES = {
    "b": [20, 10],
    "d": [0.02, 0.025],
    "g": [0.5, 0.4],
    "e": [0.05, 0.1],
    "s": [0.1, 0.2],
    "th": [0.03, 0.01],
    "p": [0.4, 0.3],
}
MULTIGROUP = Model(
    "Multigroup SIRS with vaccination",
    "I",
    "S R",
    MULTIGROUP_ARROWS.format(incidence="S*B(I)"),
    MULTIGROUP_VALUES,
    groups=("1", "2"),
    matrices={"B": [[0.001, 0.0005], [0.0002, 0.0015]]},
    shares="p",
)


def _free(p, i):
    """Susceptibles of group i without infection, by hand from the two equations at rest."""
    return p.b[i] * (p.d[i] * (1 - p.p[i]) + p.s[i]) / (p.d[i] * (p.d[i] + p.th[i] + p.s[i]))


def _proportionate(p):
    return sum(_free(p, i) * p.a[i] * p.l[i] / (p.d[i] + p.g[i] + p.e[i]) for i in range(2))


PROPORTIONATE = Model(
    "Multigroup SIRS, proportionate mixing",
    "I",
    "S R",
    MULTIGROUP_ARROWS.format(incidence="S*a*sum(l*I)"),
    {**MULTIGROUP_VALUES, "a": [0.002, 0.001], "l": [0.6, 1.1]},
    groups=("1", "2"),
    shares="p",
    formula=_proportionate,
)


def test_multigroup():
    solution = MULTIGROUP.solve()
    assert solution.types == ("I[1]", "I[2]")
    assert solution.infection_free["S[1]"] == close(746.6666667)
    assert solution.infection_free["S[2]"] == close(370.2127660)
    assert list(solution.V) == matrix([[0.57, 0], [0, 0.525]])
    assert list(solution.K) == matrix([[1.309941520, 0.7111111111], [0.1298992161, 1.057750760]])
    assert solution.R0 == close(1.512894497)
    assert solution.growth_rate == close(0.2851435400)
    # F_ij takes the susceptibles of the row's group.
    assert solution.F[0][1] == close(746.6666667 * 0.0005)


def test_multigroup_proportionate():
    assert PROPORTIONATE.solve().R0 == close(2.347613715)
    assert PROPORTIONATE.solve().closed_form is not None
    for seed in range(3):
        drawn = PROPORTIONATE.drawn(seed)
        assert drawn.solve().R0 == pytest.approx(drawn.published(), rel=1e-12)


def given_matrix(K, sizes=None, name="K"):
    """Return a model whose next-generation matrix is K: each case lasts one time unit and infects K[i][j] of group i.

    With `sizes` the matrix is one of contacts instead: K_ij = q N_i C_ij/N_j.
    """
    groups = tuple(str(i + 1) for i in range(len(K)))
    rate, values = "S*M(I)/n", {"n": list(sizes or [1.0] * len(K))}
    return Model(
        name, "I", "S", f"S->I t: {rate}; I->0 x: I", values, free={"S": "n"}, groups=groups, matrices={"M": K}
    )


# Roberts & Heesterbeek (2003) Proc. R. Soc. B 270:1359-1364, Heesterbeek & Roberts (2007) Math. Biosci. 206:3-10
# (abstracts read); the formula T = rho(P K (I - (I - P) K)^-1) is from memory, the matrices are ours, the numbers
# computed apart.
TYPE_NUMBERS = [
    ([[0.8, 1.5], [0.6, 0.5]], 1.610468636, {"1": 2.6, "2": 5, "12": 1.610468636}),
    (
        [[0.6, 0.4, 0], [0.5, 0.3, 0.9], [0.2, 0.7, 0.4]],
        1.341716259,
        {"1": None, "2": 2.15, "3": 4.45, "12": 1.653693598, "13": 1.727607616, "23": 1.521954446, "123": 1.341716259},
    ),
    ([[0.8, 0.3], [0.2, 1.1]], 1.237228132, {"1": None, "2": 1.4, "12": 1.237228132}),
]


@pytest.mark.parametrize(("K", "R0", "expected"), TYPE_NUMBERS)
def test_type_numbers(K, R0, expected):
    model = given_matrix(K)
    solution = model.solve()
    assert solution.R0 == close(R0)
    assert list(solution.K) == matrix(K)
    numbers = model.control().types
    assert len(numbers) == 2 ** len(K) - 1
    for members, T in expected.items():
        key = tuple(f"I[{member}]" for member in members)
        found = numbers[key if len(key) > 1 else key[0]]
        if T is None:
            assert found.T is None
            assert found.critical_effort is None
            assert found.why
            continue
        assert found.T == close(T)
        assert found.critical_effort == pytest.approx(1 - 1 / T, abs=1e-9)
        # The meaning of T: divide the rows of the targeted types by it, and R0 is 1.
        rows = [[k / T if str(i + 1) in members else k for k in row] for i, row in enumerate(K)]
        assert given_matrix(rows).solve().R0 == pytest.approx(1, rel=1e-9)


def test_effort_on_one_group_is_not_that_on_all():
    numbers = given_matrix(TYPE_NUMBERS[0][0]).control().types
    assert numbers["I[1]"].critical_effort == close(0.6153846154)
    assert numbers["I[2]"].critical_effort == close(0.8)
    assert numbers["I[1]", "I[2]"].critical_effort == close(0.3790627288)


def test_why_names_what_sustains_itself():
    assert "1.145" in given_matrix(TYPE_NUMBERS[1][0]).control().types["I[1]"].why


def test_target_numbers():
    # Shuai, Heesterbeek & van den Driessche (2013) J. Math. Biol. 67:1067-1082 (abstract read); formula from memory:
    # a single entry (1, 2) of two types has T = k12 k21/((1 - k11)(1 - k22)).
    targets = given_matrix([[0.8, 1.5], [0.6, 0.5]]).control().targets
    assert targets["I[1]", "I[2]"].T == close(9)
    assert targets["I[2]", "I[1]"].T == close(9)
    assert targets["I[1]", "I[1]"].T is None
    assert targets["I[2]", "I[2]"].T is None


# Nold (1980) Math. Biosci. 52:227-240; Jacquez et al. (1988) Math. Biosci. 92:119-199, both through Feng et al. (2016)
# Math. Biosci. 287:93-104 (abstract read). Formulas from memory: with proportionate contacts R0 = b D sum(c^2 N)/sum(c
# N), with a share eps kept for the own group the largest root of sum_j b D (1-eps)^2 c_j^2 N_j/(x - b D c_j eps) = sum
# (1-eps) c_j N_j.
CORE = Model(
    "Core group",
    "I",
    "S",
    "S->I t: b*c*S*(eps*I/N + (1-eps)*sum((1-eps)*c*I)/sum((1-eps)*c*N)); I->S x: I/D",
    {"b": 0.12, "D": 1, "c": [2, 15], "n": [900, 100], "eps": 0},
    {"N": "S + I"},
    {"S": "n"},
    groups=("rest", "core"),
    shares="b eps",
)


def test_core_group():
    assert CORE.solve().R0 == close(0.9490909091)
    assert CORE.but(eps=0.3).solve().R0 == close(1.165131563)
    # Only the own group, the limit eps = 1: the core alone, by hand 0.12 * 15.
    alone = CORE.but(arrows="S->I t: b*c*S*I/N; I->S x: I/D").solve()
    assert alone.R0 == close(1.8)
    assert not alone.structure.irreducible
    # Not the mean number of contacts, which would give 0.396.
    assert CORE.solve().R0 > 2 * 0.12 * (2 * 900 + 15 * 100) / 1000


def test_core_group_keeps_sizes_in_its_distribution():
    # By hand: with proportionate contacts new cases arise in proportion to c_i N_i, here 1800 : 1500.
    assert CORE.solve().right == close_pair(18 / 33, 15 / 33)


def close_pair(*values):
    return pytest.approx(values, rel=1e-9)


# From memory (same sources): R0 = sqrt(b_fm b_mf D_m D_f [sum c_m^2 N_m/sum c_m N_m][sum c_f^2 N_f/sum c_f N_f]).
TWO_SEXES = Model(
    "Two sexes",
    "Im If",
    "Sm Sf",
    "Sm->Im t: bfm*cm*Sm*sum(cf*If)/sum(cf*nf); Im->Sm x: Im/Dm; Sf->If t: bmf*cf*Sf*sum(cm*Im)/sum(cm*nm)"
    "; If->Sf x: If/Df",
    {
        "bfm": 0.3,
        "bmf": 0.2,
        "Dm": 0.5,
        "Df": 1,
        "cm": [1.5, 12],
        "nm": [900, 100],
        "cf": [1.6, 20.6],
        "nf": [950, 50],
    },
    free={"Sm": "nm", "Sf": "nf"},
    groups=("low", "high"),
    formula=lambda p: math.sqrt(p.bfm * p.bmf * p.Dm * p.Df * _weighted(p.cm, p.nm) * _weighted(p.cf, p.nf)),
)


def test_two_sexes():
    model = TWO_SEXES
    solution = model.solve()
    assert solution.R0 == close(1.338716785)
    assert model.published() == close(1.338716785)
    assert solution.structure.period == 2
    assert solution.per_cycle == close(1.338716785**2)
    contacts = [sum(c * n for c, n in zip(model.values["c" + s], model.values["n" + s], strict=True)) for s in "mf"]
    assert contacts == pytest.approx([2550, 2550])  # both sexes make the same number of contacts


def _weighted(c, n):
    return sum(x * x * m for x, m in zip(c, n, strict=True)) / sum(x * m for x, m in zip(c, n, strict=True))


# Wallinga et al. (2006) Am. J. Epidemiol. 164:936-944 (citation read); matrix and numbers ours, computed apart.
CONTACTS = [[8, 4], [2, 6]]
SURVEY = Model(
    "Contacts made reciprocal",
    "I",
    "S",
    "S->I t: q*s*S*C(I/N); I->0 x: I",
    {"q": 0.2, "s": [1, 1], "n": [300, 700]},
    {"N": "S + I"},
    {"S": "n"},
    groups=("a", "b"),
    matrices={"C": CONTACTS},
    matrix_keys='population = "N"\nreciprocal = true',
)


def test_reciprocal_contacts_and_their_orientation():
    solution = SURVEY.solve()
    # C' = [[8, 4.333333333], [1.857142857, 6]] and K_ij = q N_i C'_ij/N_j.
    assert list(solution.K) == matrix([[1.6, 0.3714285714], [0.8666666667, 1.2]])
    assert solution.R0 == close(2.001585208)
    assert solution.right == close_pair(0.4804941148, 0.5195058852)
    # The shortcut q C' has the same root and the wrong cases: R0 alone proves nothing.
    shortcut = given_matrix([[0.2 * c for c in row] for row in ([8, 13 / 3], [13 / 7, 6])]).solve()
    assert shortcut.R0 == close(2.001585208)
    assert shortcut.right == close_pair(0.6833553211, 0.3166446789)


def test_susceptibility_and_infectivity_cannot_be_told_by_R0():
    rows = SURVEY.but(s=[1, 0.5])
    columns = SURVEY.but(arrows="S->I t: q*S*C(s*I/N); I->0 x: I", s=[1, 0.5])
    first, second = rows.solve(), columns.solve()
    assert first.R0 == close(1.741055677)
    assert second.R0 == close(1.741055677)
    assert first.right != close_pair(*second.right)


def test_contacts_that_do_not_balance_are_told():
    from dataclasses import replace

    solution = replace(SURVEY, matrix_keys='population = "N"').solve()
    # By hand: 300 * 4 = 1200 against 700 * 2 = 1400 contacts a day.
    assert any("C" in warning for warning in solution.warnings)
    assert solution.R0 == pytest.approx(2.0, rel=1e-12)  # by hand: root 10 of the matrix as given, times q
    assert len(SURVEY.solve().warnings) == len(solution.warnings) - 1  # both say that the population is closed


@pytest.mark.parametrize("size", [1000, 2000])
def test_density_or_frequency(size):
    # By hand: beta S I gives beta N D, which doubles with N; beta S I/N gives beta D.
    density = Model(
        "Density", "I", "S", "S->I t: beta*S*I; I->0 x: I/D", {"beta": 4e-4, "D": 5, "n": size}, {}, {"S": "n"}
    )
    frequency = Model(
        "Frequency", "I", "S", "S->I t: beta*S*I/(S+I); I->0 x: I/D", {"beta": 0.4, "D": 5, "n": size}, {}, {"S": "n"}
    )
    assert density.solve().R0 == close(2 * size / 1000)
    assert frequency.solve().R0 == close(2)


SETTINGS = {
    "home": [[2, 1.4], [0.6, 1.5]],
    "school": [[5, 0.7], [0.3, 0.2]],
    "work": [[0, 0.35], [0.15, 2.5]],
    "other": [[1, 1.4], [0.6, 1.8]],
}


def test_settings_do_not_add_up():
    # Computed apart; for reciprocal matrices of one population the root of the sum is at most the sum of the roots.
    sum_of = "+".join(f"w_{name}*{name}(I/N)" for name in SETTINGS)
    model = Model(
        "Settings",
        "I",
        "S",
        f"S->I t: S*({sum_of}); I->0 x: I",
        {"n": [300, 700]} | {f"w_{name}": 1.0 for name in SETTINGS},
        {"N": "S + I"},
        {"S": "n"},
        groups=("a", "b"),
        matrices=SETTINGS,
        matrix_keys='population = "N"',
    )
    whole = model.solve()
    assert whole.R0 == close(9.711549373)
    roots = {"home": 2.7, "school": 5.043358345, "work": 2.520826503, "other": 2.4}
    without = {"home": 0.2770882532, "school": 0.2902791870, "work": 0.07725247529, "other": 0.2041468782}
    for name, root in roots.items():
        only = model.but(**{f"w_{other}": 0.0 for other in SETTINGS if other != name})
        assert only.solve().R0 == close(root)
        rest = model.but(**{f"w_{name}": 0.0})
        assert 1 - rest.solve().R0 / whole.R0 == pytest.approx(without[name], rel=3e-9)
