"""Printed formulas against the models they are for, and against slips made on purpose.

Formulas: published or textbook, as in `tests/published` (which says what was read); each slip is made by hand.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import pytest

import ngm
from tests.published.models import evaluate
from tests.published.test_groups import CORE, MULTIGROUP, PROPORTIONATE, TWO_SEXES
from tests.published.test_one_host import (
    BRANCH,
    BRANCH_AT_INFECTION,
    SEIR,
    SHED_TRANSITION,
    SHED_TRANSMISSION,
    SIR,
    STAGED,
    TREATMENT,
    TREATMENT_COUNTED,
    TWO_INFECTIOUS,
    TWO_LATENT,
)
from tests.published.test_vaccination import ALL_OR_NOTHING, BREAKTHROUGH, LEAKY, WANING
from tests.published.test_vectors_and_strains import BOTH, MALARIA, MALARIA_LATENT, STRAINS, VECTOR

DIRECT, WATER = "bI/(gamma + mu)", "bW*xi/(de*(gamma + mu))"
STAGES = "k1/(n1 + d1) + n1/(n1 + d1)*k2/(n2 + d2) + n1/(n1 + d1)*n2/(n2 + d2)*k3/(n3 + d3)"
FREE = "b[{0}]*(d[{0}]*(1 - p[{0}]) + s[{0}])/(d[{0}]*(d[{0}] + th[{0}] + s[{0}]))*a[{0}]*l[{0}]/(d[{0}] + g[{0}] + e[{0}])"

# With nothing kept for the own group the formula is that of proportionate contacts.
PROPORTIONATE_CORE = replace(
    CORE.but(arrows="S->I t: b*c*S*sum(c*I)/sum(c*N); I->S x: I/D"),
    values={name: value for name, value in CORE.values.items() if name != "eps"},
)


@dataclass(frozen=True)
class Given:
    """A next-generation matrix as a paper gives it, by the names of its entries."""

    name: str
    values: dict

    def but(self, **values):
        return replace(self, values={**self.values, **values})

    @property
    def scenario(self):
        rows = sorted({name[1] for name in self.values})
        lines = ["[scenario]", f'title = "{self.name}"', 'time_unit = "day"', "[parameters]"]
        lines += [f"{name} = {{ value = {value} }}" for name, value in self.values.items()]
        lines += ["[next_generation]", f"types = {[f'type{row}' for row in rows]}".replace("'", '"')]
        lines += [f"K = {[[f'k{i}{j}' for j in rows] for i in rows]}".replace("'", '"')]
        return ngm.loads("\n".join(lines))

    def solve(self):
        return ngm.solve(self.scenario)


# Matrix ours; formulas of the type and target numbers from memory (Roberts & Heesterbeek 2003; Shuai et al. 2013).
TWO_TYPES = Given("Two types", {"k11": 0.8, "k12": 1.5, "k21": 0.6, "k22": 0.5})
LARGER_ROOT = "({a} + {d} + sqrt(({a} - {d})^2 + 4*{b}*{c}))/2"
ROOT_OF_TWO = LARGER_ROOT.format(a="k11", b="k12", c="k21", d="k22")

# B_ij S_i over what leaves the infectious of j; the larger root of the quadratic is by hand.
SUSCEPTIBLES = "b[{0}]*(d[{0}]*(1 - p[{0}]) + s[{0}])/(d[{0}]*(d[{0}] + th[{0}] + s[{0}]))"
ENTRY = {(i, j): f"({SUSCEPTIBLES.format(i)}*B[{i},{j}]/(d[{j}] + g[{j}] + e[{j}]))" for i in (1, 2) for j in (1, 2)}
GENERAL = LARGER_ROOT.format(a=ENTRY[1, 1], b=ENTRY[1, 2], c=ENTRY[2, 1], d=ENTRY[2, 2])

WEIGHTED = "(c{0}[low]^2*n{0}[low] + c{0}[high]^2*n{0}[high])/(c{0}[low]*n{0}[low] + c{0}[high]*n{0}[high])"
SEXES = f"sqrt(bfm*bmf*Dm*Df*{WEIGHTED.format('m')}*{WEIGHTED.format('f')})"
BRANCHES = "beta*sigma/(sigma + mu)*(p/(gI + mu) + q*(1 - p)/(gA + mu))"

#: model, its published formula, slips: a survival dropped, a sign, two rates swapped, survival of another stage
FORMULAS = [
    (SIR, "beta/(gamma + mu)", ["beta/gamma", "beta/(gamma - mu)", "gamma/(beta + mu)"]),
    (
        SEIR,
        r"\frac{\beta\sigma}{(\sigma+\mu)(\gamma+\mu)}",
        [
            r"\frac{\beta}{\gamma+\mu}",
            "beta*sigma/((sigma - mu)*(gamma + mu))",
            "beta*gamma/((sigma + mu)*(gamma + mu))",
            "sigma*beta*gamma/((gamma + mu)*(sigma + mu)*(gamma + mu))",
        ],
    ),
    (
        TREATMENT,
        "beta1*nu/((d + nu + r1)*(d + r2) - p*r2*nu)",
        [
            "beta1*nu/((d + nu + r1)*(d + r2) + p*r2*nu)",
            "beta1*nu/((d + nu + r2)*(d + r1) - p*r2*nu)",
            "beta1/((d + nu + r1)*(d + r2) - p*r2*nu)",
            "beta2*nu/((d + nu + r1)*(d + r2) - p*r2*nu)",
        ],
    ),
    (
        TREATMENT_COUNTED,
        "nu*(beta1 + p*r2)/((d + nu + r1)*(d + r2))",
        ["nu*(beta1 - p*r2)/((d + nu + r1)*(d + r2))", "nu*(beta1 + r2)/((d + nu + r1)*(d + r2))"],
    ),
    (PROPORTIONATE, f"{FREE.format(1)} + {FREE.format(2)}", [FREE.format(1), f"{FREE.format(1)} - {FREE.format(2)}"]),
    (
        STAGED,
        STAGES,
        [
            STAGES.replace("n1/(n1 + d1)*n2/(n2 + d2)*k3", "n2/(n2 + d2)*k3"),
            STAGES.replace("k3/(n3 + d3)", "k3/(n3 - d3)"),
            STAGES.replace("n1/(n1 + d1)*k2", "n3/(n3 + d3)*k2"),
        ],
    ),
    (STRAINS, "max(beta1/(b + g1), beta2/(b + g2))", ["max(beta1/(b + g2), beta2/(b + g1))", "beta2/(b + g2)"]),
    (VECTOR, "sqrt(bs*bm/(c*(b + gamma)))", ["sqrt(bs*bm/(c*(b - gamma + 2*b)))", "sqrt(bs*bm/(b*(c + gamma)))"]),
    (
        BOTH,
        "sqrt(max(bs1*bm1/(c*(b + g1)), bs2*bm2/(c*(b + g2))))",
        ["sqrt(bs1*bm1/(c*(b + g1)) + bs2*bm2/(c*(b + g2)))"],
    ),
    (
        TWO_LATENT,
        "beta/(gamma + mu)*(p*n1/(n1 + mu) + (1 - p)*n2/(n2 + mu))",
        [
            "beta/(gamma + mu)",
            "beta/(gamma + mu)*(p*n2/(n2 + mu) + (1 - p)*n1/(n1 + mu))",
            "beta/(gamma + mu)*(p*n1/(n1 + mu) - (1 - p)*n2/(n2 + mu))",
        ],
    ),
    (
        TWO_INFECTIOUS,
        "p*n1*beta1/((n1 + mu)*(g1 + mu)) + (1 - p)*n2*beta2/((n2 + mu)*(g2 + mu))",
        [
            "p*n1*beta1/((n1 + mu)*(g2 + mu)) + (1 - p)*n2*beta2/((n2 + mu)*(g1 + mu))",
            "p*beta1/(g1 + mu) + (1 - p)*beta2/(g2 + mu)",
        ],
    ),
    (MALARIA, r"R_0 = \sqrt{\frac{m a^2 b c}{\gamma g}}", ["sqrt(m*a*b*c/(gamma*g))", "sqrt(m*a^2*b*c/(gamma + g))"]),
    (
        MALARIA_LATENT,
        "sqrt(m*a^2*b*c*nn/(gamma*g*(nn + g)))",
        ["sqrt(m*a^2*b*c/(gamma*g))", "sqrt(m*a^2*b*c*gamma/(gamma*g*(gamma + g)))"],
    ),
    (
        PROPORTIONATE_CORE,
        "b*D*(c[rest]^2*n[rest] + c[core]^2*n[core])/(c[rest]*n[rest] + c[core]*n[core])",
        ["b*D*(c[rest]*n[rest] + c[core]*n[core])/(n[rest] + n[core])"],
    ),
    (SHED_TRANSITION, f"{DIRECT} + {WATER}", [f"{DIRECT} - {WATER}", f"{DIRECT} + bW*xi/(de*gamma)", DIRECT]),
    (
        SHED_TRANSMISSION,
        f"({DIRECT} + sqrt(({DIRECT})^2 + 4*{WATER}))/2",
        [f"({DIRECT} + sqrt(({DIRECT})^2 + {WATER}))/2"],
    ),
    (
        BRANCH,
        "beta*sigma/(sigma + mu)*(p/(gI + mu) + q*(1 - p)/(gA + mu))",
        [
            "beta*(p/(gI + mu) + q*(1 - p)/(gA + mu))",
            "beta*sigma/(sigma + mu)*(q*p/(gI + mu) + (1 - p)/(gA + mu))",
            "beta*sigma/(sigma + mu)*(p/(gA + mu) + q*(1 - p)/(gI + mu))",
        ],
    ),
    (
        BRANCH_AT_INFECTION,
        BRANCHES,
        [
            BRANCHES.replace("*sigma/(sigma + mu)", ""),
            BRANCHES.replace("p/(gI + mu) + q*(1 - p)/(gA + mu)", "p/(gA + mu) + q*(1 - p)/(gI + mu)"),
            BRANCHES.replace("(1 - p)", "(1 + p)"),
        ],
    ),
    (
        MULTIGROUP,
        GENERAL,
        [
            GENERAL.replace("+ sqrt", "- sqrt"),
            GENERAL.replace("(1 - p[1])", "(1 + p[1])"),
            GENERAL.replace("(d[1] + g[1] + e[1])", "(d[2] + g[2] + e[2])"),
            f"{ENTRY[1, 1]} + {ENTRY[2, 2]}",
        ],
    ),
    (
        TWO_SEXES,
        SEXES,
        [SEXES.replace("Dm*Df", "Dm*Dm"), SEXES.replace("cm[low]^2", "cm[low]"), SEXES.replace("bfm*", "")],
    ),
    (
        TWO_TYPES,
        ROOT_OF_TWO,
        [
            ROOT_OF_TWO.replace("4*k12*k21", "4*k12*k22"),
            ROOT_OF_TWO.replace("+ 4*", "- 4*"),
            "k11 + k12*k21/(1 + k22)",
            "k12*k21/((1 - k11)*(1 + k22))",
        ],
    ),
    (LEAKY, "beta/(gamma + mu)*(1 - eps*phi)", ["beta/(gamma + mu)*(1 - phi)", "beta/(gamma + mu)*(1 + eps*phi)"]),
    (ALL_OR_NOTHING, "beta/(gamma + mu)*(1 - eps*phi)", ["beta/(gamma + mu)*(1 - eps*phi)^2/(1 - phi)"]),
    (
        WANING,
        "beta/(gamma + mu)*(1 - eps*phi*mu/(mu + omega))",
        ["beta/(gamma + mu)*(1 - eps*phi)", "beta/(gamma + mu)*(1 - eps*phi*omega/(mu + omega))"],
    ),
    (
        BREAKTHROUGH,
        "beta/(gamma + mu)*(1 - phi + phi*(1 - eps)*(1 - ei))",
        ["beta/(gamma + mu)*(1 - eps*phi)", "beta/(gamma + mu)*(1 - phi + phi*(1 - eps)*ei)"],
    ),
]
NAMED = [(model, text) for model, text, _ in FORMULAS]
PLAIN = [(model, text) for model, text in NAMED if "\\" not in text]
SLIPS = [(model, slip) for model, _, slips in FORMULAS for slip in slips]


@pytest.mark.parametrize(("model", "text"), NAMED, ids=[model.name for model, _ in NAMED])
def test_the_published_formula_is_recognised(model, text):
    found = ngm.formula(model.scenario, text)
    assert found.verdict == "equal"
    assert found.points >= 12  # 25 with a closed form, 13 without
    assert found.counterexample is None


@pytest.mark.parametrize(("model", "text"), SLIPS, ids=[f"{model.name}: {slip}" for model, slip in SLIPS])
def test_a_slip_is_caught_with_a_right_counterexample(model, text):
    found = ngm.formula(model.scenario, text)
    assert found.verdict != "equal"
    _counterexample_is_right(model, text, found)


def _counterexample_is_right(model, text, found):
    """Second route: the published formula as Python, and the formula by the tests' own evaluation, at the point told."""
    point = found.counterexample
    assert point is not None
    own = evaluate(text, point) if found.formula_there is not None and "[" not in text and "\\" not in text else None
    assert own is None or own == pytest.approx(found.formula_there, rel=1e-9)
    assert found.formula_there is None or found.formula_there != pytest.approx(found.R0_there, rel=1e-9)
    values = {name: point[name] for name in model.values if name in point}
    if set(values) == set(model.values):
        assert model.but(**values).solve().R0 == pytest.approx(found.R0_there, rel=1e-9)


@pytest.mark.parametrize(("model", "text"), PLAIN, ids=[model.name for model, _ in PLAIN])
def test_a_root_missing_or_extra_is_named(model, text):
    assert ngm.formula(model.scenario, f"({text})^2").verdict == "square"
    assert ngm.formula(model.scenario, f"sqrt({text})").verdict == "root"


def test_per_cycle_is_told():
    found = ngm.formula(MALARIA.scenario, "m*a^2*b*c/(gamma*g)")
    assert found.verdict == "square"
    assert "per cycle" in found.message
    assert found.R0_there == pytest.approx(math.sqrt(30))
    assert found.formula_there == pytest.approx(30)


def test_other_splits_and_type_numbers_are_told():
    whole = f"{DIRECT} + {WATER}"
    found = ngm.formula(SHED_TRANSMISSION.scenario, whole)
    assert found.verdict == "type number"
    assert "type-reproduction number of I" in found.message
    found = ngm.formula(SHED_TRANSITION.scenario, f"({DIRECT} + sqrt(({DIRECT})^2 + 4*{WATER}))/2")
    assert found.verdict == "other split"
    found = ngm.formula(TREATMENT.scenario, "nu*(beta1 + p*r2)/((d + nu + r1)*(d + r2))")
    assert found.verdict == "other split"
    assert "flow 3 as transmission" in found.message


@pytest.mark.parametrize(
    "text",
    [
        r"\begin{equation} R_0 = \frac{\beta\sigma}{(\sigma+\mu)(\gamma+\mu)}. \label{eq:1} \end{equation}",
        r"\begin{align} R_0 &= \frac{\beta\sigma}{(\sigma+\mu)(\gamma+\mu)} \nonumber \\ \end{align}",
        r"\[ \mathcal{R}_0 = \rho\left(FV^{-1}\right) = \frac{\beta\sigma}{(\sigma+\mu)(\gamma+\mu)} \approx 3.97 \]",
        r"\(R_0=\frac\beta{\gamma+\mu}\cdot\frac{\sigma}{\sigma+\mu}\)",
        r"R_0 = \frac{\beta \sigma S_0}{N (\sigma+\mu)(\gamma+\mu)}",
        r"R_0 = \frac{\beta \sigma S^*}{N^{*} (\sigma+\mu)(\gamma+\mu)}",
        r"R_0 = \frac{\beta \sigma S^0}{N^{0} (\sigma+\mu)(\gamma+\mu)}",
        r"R_0^2 = \left(\frac{\beta \sigma}{(\sigma+\mu)(\gamma+\mu)}\right)^2",
        "beta sigma/((sigma + mu)(gamma + mu))",
        "βσ/((σ+μ)(γ+μ))",
        "R0 = beta*sigma/((sigma + mu)*(gamma + mu)) = 3.974",
    ],
)
def test_as_papers_print_it(text):
    """All of these are beta sigma/((sigma + mu)(gamma + mu)), since S = N without infection."""
    assert (found := ngm.formula(SEIR.scenario, text)).verdict == "equal"
    assert found.proof in ("symbols", "fractions")  # fractions where symbols ran out of time


@pytest.mark.parametrize(
    ("model", "text", "verdict"),
    [
        (PROPORTIONATE_CORE, "b*D*sum(c^2*n)/sum(c*n)", "equal"),
        (PROPORTIONATE_CORE, "b*D*sum(c*n)/sum(n)", "different"),  # the mean, without the variance
        (PROPORTIONATE, "sum(S*a*l/(d + g + e))", "equal"),
        (TWO_SEXES, "sqrt(bfm*bmf*Dm*Df*sum(cm^2*nm)/sum(cm*nm)*sum(cf^2*nf)/sum(cf*nf))", "equal"),
        (SEIR, "sum(beta)/(gamma + mu)*sigma/(sigma + mu)", "equal"),  # nothing is grouped: one term
    ],
    ids=lambda value: getattr(value, "name", value),
)
def test_sums_over_groups(model, text, verdict):
    assert ngm.formula(model.scenario, text).verdict == verdict


def test_a_grouped_name_needs_its_group():
    with pytest.raises(ngm.ExpressionError, match=r"'c' has a value in each group. Name one, c\[rest\]"):
        ngm.formula(PROPORTIONATE_CORE.scenario, "b*D*c")


def test_a_square_on_the_left():
    assert ngm.formula(MALARIA.scenario, r"R_0^2 = \frac{m a^2 b c}{\gamma g}").verdict == "equal"
    assert ngm.formula(MALARIA.scenario, r"R_0 = \frac{m a^2 b c}{\gamma g}").verdict == "square"


def test_type_and_target_numbers_of_a_given_matrix():
    found = ngm.formula(TWO_TYPES.scenario, "k11 + k12*k21/(1 - k22)")
    assert found.verdict == "type number"
    assert "of type1," in found.message
    found = ngm.formula(TWO_TYPES.scenario, "k12*k21/((1 - k11)*(1 - k22))")
    assert found.verdict == "target number"
    assert "type1 by type2" in found.message
    assert found.formula_there == pytest.approx(9)  # printed


def test_equality_is_proven_where_there_is_a_closed_form():
    found = ngm.formula(SEIR.scenario, "sigma*beta/(gamma*sigma + gamma*mu + mu*sigma + mu^2)")
    assert (found.verdict, found.exact) == ("equal", True)
    assert (
        found.to_json()["proof"] == found.proof in ("symbols", "fractions")
    )  # fractions where symbols ran out of time


def test_a_threshold_is_never_called_equal():
    R0 = "beta*sigma/((sigma + mu)*(gamma + mu))"
    found = ngm.formula(SEIR.scenario, f"1 + ({R0} - 1)*sigma/(sigma + gamma)")
    assert found.verdict == "threshold only"
    assert found.formula_there != pytest.approx(found.R0_there, rel=1e-6)
    assert "sigma" in found.responses


def test_names_and_syntax_are_told():
    with pytest.raises(ngm.ExpressionError, match="Did you mean 'beta'"):
        ngm.formula(SIR.scenario, "bata/(gamma + mu)")
    with pytest.raises(ngm.ExpressionError, match="is not read here"):
        ngm.formula(SIR.scenario, r"\foo{\beta}")
    with pytest.raises(ngm.ExpressionError, match="is empty"):
        ngm.formula(SIR.scenario, "R_0 =")


@pytest.mark.parametrize(
    ("text", "value"),
    [
        (r"\mathcal{R}_0 = \frac{\beta}{\gamma+\mu}", 2.0),  # by hand, at beta 2, gamma 0.75, mu 0.25
        (r"$\beta\,/\left(\gamma + \mu\right)$", 2.0),
        (r"\frac{\beta}{\gamma}\cdot\frac{\gamma}{\gamma + \mu}", 2.0),
        (r"\beta / \frac{\gamma + \mu}{\beta}", 4.0),
        (r"\sqrt{\beta^2}", 2.0),
        (r"\sqrt[3]{\beta^{3}} \exp(\mu - \mu)", 2.0),
        (r"\max\{\beta, \gamma\}", 2.0),
    ],
)
def test_latex(text, value):
    from ngm.expression.from_latex import from_latex, right_side

    own = from_latex(right_side(text), ["beta", "gamma", "mu"])
    assert evaluate(own, {"beta": 2.0, "gamma": 0.75, "mu": 0.25}) == pytest.approx(value)
