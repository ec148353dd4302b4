"""Published models of one host population: demography, progression, treatment, water, branches."""

from __future__ import annotations

import math

import numpy as np
import pytest

from tests.published.models import Model, close, deaths, matrix, names_in

# Textbook: Anderson & May (1991) Infectious Diseases of Humans; from memory.
SIR = Model(
    "SIR with demography",
    "I",
    "S R",
    "0->S x: Lambda; S->I t: beta*S*I/N; I->R x: gamma*I" + deaths("S I R", "mu"),
    {"Lambda": 2.0, "beta": 0.3, "gamma": 0.1, "mu": "1/18250"},
    {"N": "S + I + R"},
    formula=lambda p: p.beta / (p.gamma + p.mu),
)

# Textbook; from memory.
SEIR = Model(
    "SEIR with demography",
    "E I",
    "S R",
    "0->S x: Lambda; S->E t: beta*S*I/N; E->I x: sigma*E; I->R x: gamma*I" + deaths("S E I R", "mu"),
    {"Lambda": 2.0, "beta": 0.5, "sigma": 0.2, "gamma": 0.125, "mu": 0.0005},
    {"N": "S + E + I + R"},
    formula=lambda p: p.beta * p.sigma / ((p.sigma + p.mu) * (p.gamma + p.mu)),
)

# van den Driessche & Watmough (2002) Math. Biosci. 180:29-48, section 4.1, doi:10.1016/S0025-5564(02)00108-6: the
# abstract names the treatment model; its equations are from memory. p: share of treatments that fail.
TREATMENT_REST = "; E->I x: nu*E; E->T x: r1*E; I->T x: (1-p)*r2*I; 0->S x: b" + deaths("S E I T", "d")
INCIDENCE = "S->E t: beta1*S*I/N; T->E t: beta2*T*I/N"
TREATMENT = Model(
    "Tuberculosis treatment",
    "E I",
    "S T",
    INCIDENCE + "; I->E x: p*r2*I" + TREATMENT_REST,
    {"beta1": 2.5, "beta2": 1.2, "nu": 0.3, "r1": 0.4, "r2": 0.7, "d": 0.02, "p": 0.25, "b": 20.0},
    {"N": "S + E + I + T"},
    shares="p",
    formula=lambda q: q.beta1 * q.nu / ((q.d + q.nu + q.r1) * (q.d + q.r2) - q.p * q.r2 * q.nu),
)
# The same model with failed treatment counted as transmission: another number, the same threshold.
TREATMENT_COUNTED = Model(
    "Tuberculosis treatment, failures counted",
    "E I",
    "S T",
    INCIDENCE + "; I->E t: p*r2*I" + TREATMENT_REST,
    TREATMENT.values,
    TREATMENT.definitions,
    shares="p",
    formula=lambda q: q.nu * (q.beta1 + q.p * q.r2) / ((q.d + q.nu + q.r1) * (q.d + q.r2)),
)


def _staged(p):
    """Sum over the stages of infections in the stage, times the chance of reaching it."""
    total, reach = 0.0, 1.0
    for k, n, d in ((p.k1, p.n1, p.d1), (p.k2, p.n2, p.d2), (p.k3, p.n3, p.d3)):
        total += reach * k / (n + d)
        reach *= n / (n + d)
    return total


# The same paper, section 4.3 (staged progression); equations from memory. The last stage infects nobody, outside N.
STAGED = Model(
    "Staged progression",
    "I1 I2 I3 I4",
    "S",
    "S->I1 t: (k1*I1+k2*I2+k3*I3)*S/N; I1->I2 x: n1*I1; I2->I3 x: n2*I2; I3->I4 x: n3*I3; 0->S x: b; S->0 x: m*S"
    "; I1->0 x: d1*I1; I2->0 x: d2*I2; I3->0 x: d3*I3; I4->0 x: d4*I4",
    {"k1": 2.0, "k2": 0.1, "k3": 0.8, "n1": 4.0, "n2": 0.12, "n3": 0.5}
    | {"d1": 0.02, "d2": 0.02, "d3": 0.03, "d4": 0.9, "b": 10.0, "m": 0.02},
    {"N": "S + I1 + I2 + I3"},
    formula=_staged,
)

# Diekmann, Heesterbeek & Roberts (2010) J. R. Soc. Interface 7:873-885, doi:10.1098/rsif.2009.0386: the abstract
# states that the matrices with large and small domain share their non-zero eigenvalues; the systems are from memory.
TWO_LATENT = Model(
    "Two latent classes",
    "E1 E2 I",
    "S R",
    "0->S x: Lambda; S->E1 t: p*beta*S*I/N; S->E2 t: (1-p)*beta*S*I/N; E1->I x: n1*E1; E2->I x: n2*E2; I->R x: gamma*I"
    + deaths("S E1 E2 I R", "mu"),
    {"Lambda": 3.0, "beta": 0.6, "p": 0.3, "n1": 0.5, "n2": 0.05, "gamma": 0.2, "mu": 0.01},
    {"N": "S + E1 + E2 + I + R"},
    shares="p",
    formula=lambda q: q.beta / (q.gamma + q.mu) * (q.p * q.n1 / (q.n1 + q.mu) + (1 - q.p) * q.n2 / (q.n2 + q.mu)),
)
TWO_INFECTIOUS = Model(
    "Two latent and two infectious classes",
    "E1 E2 I1 I2",
    "S R",
    "0->S x: Lambda; S->E1 t: p*L*S; S->E2 t: (1-p)*L*S; E1->I1 x: n1*E1; E2->I2 x: n2*E2"
    "; I1->R x: g1*I1; I2->R x: g2*I2" + deaths("S E1 E2 I1 I2 R", "mu"),
    {"Lambda": 3.0, "beta1": 0.6, "beta2": 0.15, "p": 0.3, "n1": 0.5, "n2": 0.05, "g1": 0.2, "g2": 0.08, "mu": 0.01},
    {"N": "S + E1 + E2 + I1 + I2 + R", "L": "(beta1*I1 + beta2*I2)/N"},
    shares="p",
    formula=lambda q: (
        q.p * q.n1 * q.beta1 / ((q.n1 + q.mu) * (q.g1 + q.mu))
        + (1 - q.p) * q.n2 * q.beta2 / ((q.n2 + q.mu) * (q.g2 + q.mu))
    ),
)

# Tien & Earn (2010) Bull. Math. Biol. 72:1506-1533 (abstract read: a water compartment and a direct route); the choice
# of split: Cushing & Diekmann (2016) J. Theor. Biol. 404:295-302 (abstract read).
WATER = "S->I t: (bI*I+bW*W)*S; W->0 x: de*W; I->R x: gamma*I; 0->S x: mu" + deaths("S I R", "mu")
WATER_VALUES = {"bI": 0.25, "bW": 0.3, "xi": 0.4, "de": 0.5, "gamma": 0.2, "mu": 0.01}
SHED_TRANSITION = Model(
    "Cholera, shedding a transition",
    "I W",
    "S R",
    WATER + "; 0->W x: xi*I",
    WATER_VALUES,
    formula=lambda p: (p.bI + p.bW * p.xi / p.de) / (p.gamma + p.mu),
)


def _two_kinds(p):
    direct, water = p.bI / (p.gamma + p.mu), p.bW * p.xi / (p.de * (p.gamma + p.mu))
    return (direct + math.sqrt(direct**2 + 4 * water)) / 2


SHED_TRANSMISSION = Model(
    "Cholera, shedding a transmission",
    "I W",
    "S R",
    WATER + "; 0->W t: xi*I",
    WATER_VALUES,
    formula=_two_kinds,
)

# Textbook; from memory.
BRANCH_VALUES = {"beta": 0.5, "q": 0.4, "sigma": 0.25, "p": 0.65, "gI": 0.2, "gA": 0.125, "mu": 0.001, "Lambda": 1.0}
BRANCH_END = "; I->R x: gI*I; A->R x: gA*A; 0->S x: Lambda"


def _branch(p):
    survival = p.sigma / (p.sigma + p.mu)
    return p.beta * survival * (p.p / (p.gI + p.mu) + p.q * (1 - p.p) / (p.gA + p.mu))


BRANCH = Model(
    "SEIR with an asymptomatic branch",
    "E I A",
    "S R",
    "S->E t: beta*(I+q*A)*S/N; E->I x: p*sigma*E; E->A x: (1-p)*sigma*E" + BRANCH_END + deaths("S E I A R", "mu"),
    BRANCH_VALUES,
    {"N": "S + E + I + A + R"},
    shares="p q",
    formula=_branch,
)
# The branch decided at infection instead of at the end of the latent period: two types, the same root.
BRANCH_AT_INFECTION = Model(
    "SEIR, branch decided at infection",
    "E1 E2 I A",
    "S R",
    "S->E1 t: p*beta*(I+q*A)*S/N; S->E2 t: (1-p)*beta*(I+q*A)*S/N; E1->I x: sigma*E1; E2->A x: sigma*E2"
    + BRANCH_END
    + deaths("S E1 E2 I A R", "mu"),
    BRANCH_VALUES,
    {"N": "S + E1 + E2 + I + A + R"},
    shares="p q",
    formula=_branch,
)

#: model, printed R0, printed growth rate
PRINTED = [
    (SIR, 2.998357065, 0.1999452055),
    (SEIR, 3.974128424, 0.1554434801),
    (TREATMENT, 1.609787508, 0.1758236434),
    (TREATMENT_COUNTED, 1.548032407, 0.1758236434),
    (STAGED, 2.495608212, 0.2521289787),
    (TWO_LATENT, 2.507002801, 0.08548370259),
    (TWO_INFECTIOUS, 1.812558357, 0.04563968644),
    (SHED_TRANSITION, 2.333333333, 0.2092038251),
    (SHED_TRANSMISSION, 1.818825253, 0.2092038251),
    (SHED_TRANSITION.but(bI=0.05, bW=0.1), 0.6190476190, -0.06751190503),
    (SHED_TRANSMISSION.but(bI=0.05, bW=0.1), 0.7476370849, -0.06751190503),
    (BRANCH, 2.163815716, 0.09838306361),
    (BRANCH_AT_INFECTION, 2.163815716, 0.09838306361),
]
MODELS = [SIR, SEIR, TREATMENT, TREATMENT_COUNTED, STAGED, TWO_LATENT, TWO_INFECTIOUS]
MODELS += [SHED_TRANSITION, SHED_TRANSMISSION, BRANCH, BRANCH_AT_INFECTION]


@pytest.mark.parametrize(("model", "R0", "r"), PRINTED, ids=lambda value: getattr(value, "name", None))
def test_printed_numbers(model, R0, r):
    solution = model.solve()
    assert solution.R0 == close(R0)
    assert solution.growth_rate == close(r)
    assert model.published() == close(R0)


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("model", MODELS, ids=lambda model: model.name)
def test_published_formula_at_random_values(model, seed):
    # Second route: the published formula; `solve` also evaluates the program's own closed form at this point.
    drawn = model.drawn(seed)
    solution = drawn.solve()
    assert solution.closed_form is not None
    assert solution.R0 == pytest.approx(drawn.published(), rel=1e-12)


@pytest.mark.parametrize("model", MODELS, ids=lambda model: model.name)
def test_closed_form_holds_away_from_the_values(model):
    # The closed form is true for all values, not only for those of the file.
    from tests.published.models import evaluate

    form = model.solve().closed_form
    assert form is not None
    for seed in range(5):
        drawn = model.drawn(seed)
        assert evaluate(form, drawn.point()) == pytest.approx(drawn.published(), rel=1e-11)


def test_deaths_stand_in_V():
    # Without mu in V the number would be 3.
    solution = SIR.solve()
    assert solution.V == (pytest.approx((0.1 + 1 / 18250,), rel=1e-15),)
    assert solution.F == (pytest.approx((0.3,), rel=1e-15),)
    assert solution.infection_free == {"S": pytest.approx(36500), "R": 0}


def test_seir_matrices():
    solution = SEIR.solve()
    assert list(solution.F) == matrix([[0, 0.5], [0, 0]])
    assert list(solution.V) == matrix([[0.2005, 0], [-0.2, 0.1255]])
    assert list(solution.K_large) == matrix([[3.974128424, 3.984063745], [0, 0]])
    assert solution.types == ("E", "I")
    assert solution.types_at_infection == ("E",)
    assert list(solution.K) == matrix([[3.974128424]])
    assert solution.doubling_time == close(4.459158919)
    assert solution.per_cycle == close(3.974128424)


# By hand: R0 is proportional to beta, and beta = (sigma + mu)(gamma + mu)/sigma = 0.12581375 gives 1.
@pytest.mark.parametrize(
    ("beta", "R0", "r"),
    [(0.1, 0.7948256848, -0.01669125112), (0.125, 0.9935321060, -0.0005), (0.12581375, 1.0, 0.0)],
)
def test_threshold(beta, R0, r):
    solution = SEIR.but(beta=beta).solve()
    assert solution.R0 == close(R0)
    assert solution.growth_rate == pytest.approx(r, rel=1e-9, abs=1e-15)
    assert (solution.doubling_time is None) == (r <= 0)


def test_treatment_matrices():
    solution = TREATMENT.solve()
    assert list(solution.F) == matrix([[0, 2.5], [0, 0]])
    assert list(solution.V) == matrix([[0.72, -0.175], [-0.3, 0.72]])
    # The treated are absent without infection, so their susceptibility cannot matter.
    assert "beta2" not in names_in(solution.closed_form)
    assert solution.infection_free["T"] == 0
    counted = TREATMENT_COUNTED.solve()
    assert list(counted.F) == matrix([[0, 2.675], [0, 0]])
    assert list(counted.V) == matrix([[0.72, 0], [-0.3, 0.72]])


def test_last_stage_has_no_row_and_no_column_in_F():
    solution = STAGED.solve()
    assert solution.types == ("I1", "I2", "I3", "I4")
    assert solution.types_at_infection == ("I1",)
    assert list(solution.F) == matrix([[2, 0.1, 0.8, 0], [0] * 4, [0] * 4, [0] * 4])
    assert "d4" not in names_in(solution.closed_form)


def test_large_and_small_domain():
    solution = TWO_LATENT.solve()
    assert solution.types_at_infection == ("E1", "E2")
    for small in (solution.K, solution.K_large):
        roots = sorted(abs(np.linalg.eigvals(np.array(small))))
        assert roots[-1] == close(2.507002801)
        assert roots[:-1] == pytest.approx([0] * (len(roots) - 1), abs=1e-9)


def test_types_that_treat_alike():
    solution = TWO_INFECTIOUS.solve()
    assert list(solution.K) == matrix([[0.8403361345, 0.4166666667], [1.960784314, 0.9722222222]])
    assert solution.K[0][0] + solution.K[1][1] == close(solution.R0)
    numbers = TWO_INFECTIOUS.control()
    assert numbers.types["E1"].T == close(30.25210084)
    assert numbers.types["E2"].T == close(6.089181287)
    assert numbers.types["E1", "E2"].T == close(1.812558357)


def test_shedding_both_ways():
    solution = SHED_TRANSITION.solve()
    assert list(solution.F) == matrix([[0.25, 0.3], [0, 0]])
    assert list(solution.V) == matrix([[0.21, 0], [-0.4, 0.5]])
    assert solution.V[0][0] + solution.V[1][0] < 0  # a column sum below 0, and an M-matrix all the same
    assert solution.types_at_infection == ("I",)
    other = SHED_TRANSMISSION.solve()
    assert list(other.F) == matrix([[0.25, 0.3], [0.4, 0]])
    assert list(other.V) == matrix([[0.21, 0], [0, 0.5]])
    assert other.types_at_infection == ("I", "W")


def test_target_numbers_of_the_second_split():
    numbers = SHED_TRANSMISSION.control()
    assert numbers.types["I"].T == close(2.333333333)  # the other split's R0
    assert numbers.types["W"].T is None
    assert "1.19" in numbers.types["W"].why
    model = SHED_TRANSMISSION.but(bI=0.15)
    assert model.solve().R0 == close(1.484266703)
    assert SHED_TRANSITION.but(bI=0.15).solve().R0 == close(1.857142857)
    numbers = model.control()
    assert numbers.types["I"].T == close(1.857142857)
    assert numbers.types["W"].T == close(4)
    assert numbers.targets["I", "W"].T == close(4)
    assert numbers.targets["W", "I"].T == close(4)
    assert numbers.targets["W", "I"].critical_effort == close(0.75)


def test_branch_matrices():
    solution = BRANCH.solve()
    assert list(solution.F) == matrix([[0, 0.5, 0.2], [0] * 3, [0] * 3])
    assert list(solution.V) == matrix([[0.251, 0, 0], [-0.1625, 0.201, 0], [-0.0875, 0, 0.126]])


@pytest.mark.parametrize("p", [0.0, 1.0])
def test_an_empty_branch_keeps_its_types(p):
    for model, at_infection in ((BRANCH, ("E",)), (BRANCH_AT_INFECTION, ("E1", "E2"))):
        whole, edge = model.solve(), model.but(p=p).solve()
        assert edge.types == whole.types
        assert edge.types_at_infection == whole.types_at_infection == at_infection
        assert edge.R0 == pytest.approx(model.but(p=p).published(), rel=1e-12)


def test_state_numbers():
    # 3.605609219 = p a/(1 - (1 - p) b), a and b the new cases of a symptomatic and an asymptomatic case; without the
    # symptomatic state's infectivity the other sustains nothing, without the other's the first does (p a =
    # 1.610473529).
    numbers = BRANCH.control()
    assert set(numbers.states) == {"I", "A"}
    assert numbers.states["I"].T == close(3.605609219)
    assert numbers.states["I"].critical_effort == close(0.7226543590)
    assert numbers.states["A"].T is None
    assert "1.61" in numbers.states["A"].why
    assert numbers.types["E"].T == close(2.163815716)
