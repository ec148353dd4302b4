"""Published models with vectors or several strains: classes, periods, per generation and per cycle."""

from __future__ import annotations

import math

import pytest

from tests.published.models import Model, close, deaths, matrix

# van den Driessche & Watmough (2002) Math. Biosci. 180:29-48, sections 4.4 and 4.5, cut down from Feng & Velasco-
# Hernandez (1997) J. Math. Biol. 35:523-544 (abstracts read; equations from memory). One host in all: S = 1 without
# infection.
STRAINS = Model(
    "Two strains with superinfection",
    "I1 I2",
    "S",
    "S->I1 t: beta1*S*I1; S->I2 t: beta2*S*I2; I2->I1 t: nu*I1*I2; I1->S x: g1*I1; I2->S x: g2*I2; 0->S x: b"
    + deaths("S I1 I2", "b"),
    {"beta1": 0.9, "beta2": 0.7, "nu": 0.1, "g1": 0.3, "g2": 0.2, "b": 0.02},
    formula=lambda p: max(p.beta1 / (p.b + p.g1), p.beta2 / (p.b + p.g2)),
)
VECTOR = Model(
    "Vector and host",
    "I V",
    "S M",
    "S->I t: bs*S*V; M->V t: bm*M*I; I->S x: gamma*I; 0->S x: b; 0->M x: c" + deaths("S I", "b") + deaths("M V", "c"),
    {"bs": 0.6, "bm": 0.5, "b": 0.02, "gamma": 0.3, "c": 0.25},
    formula=lambda p: math.sqrt(p.bs * p.bm / (p.c * (p.b + p.gamma))),
)
# Both together: our composition of the two.
BOTH = Model(
    "Two strains, each with vectors",
    "I1 I2 V1 V2",
    "S M",
    "S->I1 t: bs1*S*V1; S->I2 t: bs2*S*V2; I2->I1 t: nu*I2*V1; M->V1 t: bm1*M*I1; M->V2 t: bm2*M*I2"
    "; I1->S x: g1*I1; I2->S x: g2*I2; 0->S x: b; 0->M x: c" + deaths("S I1 I2", "b") + deaths("M V1 V2", "c"),
    {"bs1": 0.6, "bm1": 0.5, "bs2": 0.8, "bm2": 0.45, "g1": 0.3, "g2": 0.4, "b": 0.02, "c": 0.25, "nu": 0.1},
    formula=lambda p: math.sqrt(max(p.bs1 * p.bm1 / (p.c * (p.b + p.g1)), p.bs2 * p.bm2 / (p.c * (p.b + p.g2)))),
)

# Smith et al. (2012) PLoS Pathog. 8:e1002588 (abstract read: several versions share the name); formulas from memory.
MALARIA_ARROWS = (
    "Sh->Ih t: a*b*Iv*Sh/Nh; Sv->{first} t: a*c*Sv*Ih/Nh; Ih->Sh x: gamma*Ih"
    "; 0->Sv x: g*m*H; Sv->0 x: g*Sv; Iv->0 x: g*Iv"
)
MALARIA_VALUES = {"a": 0.3, "b": 0.5, "c": 0.4, "m": 2, "gamma": 0.01, "g": 0.12, "H": 100}
MALARIA = Model(
    "Ross-Macdonald malaria",
    "Ih Iv",
    "Sh Sv",
    MALARIA_ARROWS.format(first="Iv"),
    MALARIA_VALUES,
    {"Nh": "Sh + Ih"},
    {"Sh": "H"},
    formula=lambda p: math.sqrt(p.m * p.a**2 * p.b * p.c / (p.gamma * p.g)),
)
MALARIA_LATENT = Model(
    "Ross-Macdonald malaria with a latent stage of the vector",
    "Ih Ev Iv",
    "Sh Sv",
    MALARIA_ARROWS.format(first="Ev") + "; Ev->Iv x: nn*Ev; Ev->0 x: g*Ev",
    {**MALARIA_VALUES, "nn": 0.1},
    {"Nh": "Sh + Ih"},
    {"Sh": "H"},
    formula=lambda p: math.sqrt(p.m * p.a**2 * p.b * p.c * p.nn / (p.gamma * p.g * (p.nn + p.g))),
)
MODELS = [STRAINS, VECTOR, BOTH, MALARIA, MALARIA_LATENT]


@pytest.mark.parametrize(
    ("model", "R0", "r"),
    [
        (STRAINS, 3.181818182, 0.58),
        (VECTOR, 1.936491673, 0.2638396852),
        (BOTH, 1.936491673, 0.2709909240),
        (MALARIA, 5.477225575, 0.1325474627),
        (MALARIA_LATENT, 3.692744729, 0.06086684139),
    ],
    ids=lambda value: getattr(value, "name", None),
)
def test_printed_numbers(model, R0, r):
    solution = model.solve()
    assert solution.R0 == close(R0)
    assert solution.growth_rate == close(r)
    assert model.published() == close(R0)


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("model", MODELS, ids=lambda model: model.name)
def test_published_formula_at_random_values(model, seed):
    drawn = model.drawn(seed)
    solution = drawn.solve()
    assert solution.closed_form is not None
    assert solution.R0 == pytest.approx(drawn.published(), rel=1e-12)


def test_strains():
    solution = STRAINS.solve()
    assert list(solution.F) == matrix([[0.9, 0], [0, 0.7]])
    assert list(solution.V) == matrix([[0.32, 0], [0, 0.22]])
    assert not solution.structure.irreducible
    classes = {c.types: c for c in solution.structure.classes}
    assert classes["I1",].R0 == close(2.8125)
    assert classes["I2",].R0 == close(3.181818182)
    # The strain with the larger number is not the one that grows faster.
    assert classes["I1",].growth_rate == close(0.58)
    assert classes["I2",].growth_rate == close(0.48)
    assert "max" in solution.closed_form
    assert "nu" not in solution.closed_form


def test_strains_with_vectors():
    solution = BOTH.solve()
    classes = {c.types: c for c in solution.structure.classes}
    assert set(classes) == {("I1", "V1"), ("I2", "V2")}
    assert classes["I1", "V1"].R0 == close(1.936491673)
    assert classes["I2", "V2"].R0 == close(1.851640200)
    assert [c.period for c in classes.values()] == [2, 2]
    assert classes["I2", "V2"].growth_rate == close(0.2709909240)
    assert classes["I1", "V1"].growth_rate == close(0.2638396852)
    assert solution.structure.period is None  # reducible


def test_vector_has_period_two():
    solution = VECTOR.solve()
    assert solution.structure.irreducible
    assert solution.structure.period == 2
    assert solution.per_cycle == close(3.75)  # by hand: 0.3/0.08
    moduli = sorted(math.hypot(re, im) for re, im in solution.eigenvalues)
    assert moduli == [close(1.936491673), close(1.936491673)]


@pytest.mark.parametrize(("model", "cycle"), [(MALARIA, 30), (MALARIA_LATENT, 13.63636364)])
def test_malaria_per_generation_and_per_cycle(model, cycle):
    solution = model.solve()
    assert solution.per_cycle == close(cycle)
    numbers = model.control()
    hosts, vectors = solution.types_at_infection
    for found in (
        numbers.types[hosts],
        numbers.types[vectors],
        numbers.targets[hosts, vectors],
        numbers.targets[vectors, hosts],
    ):
        assert found.T == close(cycle)
        assert found.critical_effort == close(1 - 1 / cycle)
    assert numbers.types[hosts, vectors].critical_effort == close(1 - 1 / math.sqrt(cycle))


def test_malaria_entries():
    # By hand: K_hv = a b/g, K_vh = a c m/gamma; vectors per host stand in Sv/Nh, not in Sv/Nv.
    solution = MALARIA.solve()
    assert list(solution.K) == matrix([[0, 1.25], [24, 0]])
    assert MALARIA.control().types["Ih", "Iv"].critical_effort == close(0.8174258142)
    assert MALARIA.control().types["Ih"].critical_effort == close(0.9666666667)


# Chitnis, Hyman & Cushing (2008) Bull. Math. Biol. 70:1272-1296, doi:10.1007/s11538-008-9299-0 (abstract read). Model,
# baselines and formula are from memory; R0 rounds to the 4.4 and 1.1 that are remembered from the paper. Births and
# deaths depend on the population, so the infection-free state solves two quadratic equations.
CHITNIS = Model(
    "Malaria with two logistic populations",
    "Eh Ih Rh Ev Iv",
    "Sh Sv",
    "0->Sh x: Lam + psi_h*Nh; Sh->Eh t: s_v*s_h*b_hv*Iv/(s_v*Nv + s_h*Nh)*Sh; Eh->Ih x: nu_h*Eh; Ih->Rh x: gam*Ih"
    "; Rh->Sh x: rho*Rh; Ih->0 x: del*Ih; 0->Sv x: psi_v*Nv"
    "; Sv->Ev t: s_v*s_h/(s_v*Nv + s_h*Nh)*(b_vh*Ih + bt_vh*Rh)*Sv; Ev->Iv x: nu_v*Ev"
    + deaths("Sh Eh Ih Rh", "(mu1h + mu2h*Nh)")
    + deaths("Sv Ev Iv", "(mu1v + mu2v*Nv)"),
    {"Lam": 0.033, "psi_h": 1.1e-4, "psi_v": 0.13, "s_v": 0.5, "s_h": 19, "b_hv": 0.022, "b_vh": 0.48, "bt_vh": 0.048}
    | {"nu_h": 0.1, "nu_v": 0.091, "gam": 0.0035, "del": 9e-5, "rho": 5.5e-4, "mu1h": 1.6e-5, "mu2h": 3e-7}
    | {"mu1v": 0.033, "mu2v": 2e-5},
    {"Nh": "Sh + Eh + Ih + Rh", "Nv": "Sv + Ev + Iv"},
)
LOW = {
    "Lam": 0.041,
    "psi_h": 5.5e-5,
    "s_v": 0.33,
    "s_h": 4.3,
    "b_vh": 0.24,
    "bt_vh": 0.024,
    "nu_v": 0.083,
    "del": 1.8e-5,
}
LOW |= {"rho": 2.7e-3, "mu1h": 8.8e-6, "mu2h": 2e-7, "mu2v": 4e-5}


# As the paper groups it, with the numbers of bites and the share of vectors apart: Nv/Nv must not come to 0/0 anywhere.
CHITNIS_GROUPED = CHITNIS.but(
    CHITNIS.arrows.replace(
        "s_v*s_h*b_hv*Iv/(s_v*Nv + s_h*Nh)*Sh", "s_v*Nv*s_h/(s_v*Nv + s_h*Nh)*(b_hv*Iv/Nv)*Sh"
    ).replace(
        "s_v*s_h/(s_v*Nv + s_h*Nh)*(b_vh*Ih + bt_vh*Rh)*Sv",
        "s_v*s_h*Nh/(s_v*Nv + s_h*Nh)*(b_vh*Ih/Nh + bt_vh*Rh/Nh)*Sv",
    )
)


def _chitnis(v):
    Nv = (v["psi_v"] - v["mu1v"]) / v["mu2v"]
    gain = v["psi_h"] - v["mu1h"]
    Nh = (gain + math.sqrt(gain**2 + 4 * v["mu2h"] * v["Lam"])) / (2 * v["mu2h"])
    fh, fv = v["mu1h"] + v["mu2h"] * Nh, v["mu1v"] + v["mu2v"] * Nv
    B = v["s_v"] * v["s_h"] / (v["s_v"] * Nv + v["s_h"] * Nh)
    to_vectors = v["nu_h"] / (v["nu_h"] + fh) * B * Nv
    to_vectors *= (v["b_vh"] + v["bt_vh"] * v["gam"] / (v["rho"] + fh)) / (v["gam"] + v["del"] + fh)
    to_hosts = v["nu_v"] / (v["nu_v"] + fv) * B * Nh * v["b_hv"] / fv
    return Nh, Nv, math.sqrt(to_vectors * to_hosts)


@pytest.mark.parametrize(
    ("model", "R0"), [(CHITNIS, 4.440222735), (CHITNIS.but(**LOW), 1.126664303), (CHITNIS_GROUPED, 4.440222735)]
)
def test_malaria_with_logistic_populations(model, R0):
    Nh, Nv, formula = _chitnis(model.values)
    assert formula == close(R0)
    solution = model.solve()
    # Without infection the state with vectors is the stable one; that without any is at rest too, and is not taken.
    assert solution.infection_free["Sv"] == pytest.approx(Nv, rel=1e-12)
    assert solution.infection_free["Sh"] == pytest.approx(Nh, rel=1e-12)
    assert solution.R0 == close(R0)
    assert solution.types_at_infection == ("Eh", "Ev")
    assert solution.per_cycle == close(R0**2, rel=3e-9)
    assert all(condition.holds for condition in solution.conditions)
