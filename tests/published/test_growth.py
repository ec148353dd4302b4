"""Growth rates against R = 1/M(-r), by staged models.

Wallinga & Lipsitch (2007) Proc. R. Soc. B 274:599-604, doi:10.1098/rspb.2006.3754 (abstract read). With x latent
stages of rate b1 and y infectious ones of rate b2: R = (1 + r/b1)^x y/sum_{i=1..y} (1 + r/b2)^-i.
"""

from __future__ import annotations

import pytest

from tests.published.models import Model, close


def staged(x, y, b1, b2, R):
    """Return a closed model with x latent and y infectious stages whose reproduction number is R."""
    stages = [f"E{i}" for i in range(1, x + 1)] + [f"I{i}" for i in range(1, y + 1)]
    arrows = [f"S->{stages[0]} t: beta*S*({'+'.join(stages[x:])})"]
    for i, stage in enumerate(stages):
        rate = "b1" if i < x else "b2"
        target = stages[i + 1] if i + 1 < len(stages) else "0"
        arrows.append(f"{stage}->{target} x: {rate}*{stage}")
    return Model(
        f"{x} latent, {y} infectious stages",
        " ".join(stages),
        "S",
        "; ".join(arrows),
        {"b1": b1, "b2": b2, "beta": R * b2 / y},
        free={"S": 1},
    )


# Mean generation time T = 2.85 days and r = 0.2 a day: 1.57 without a latent period, 1.65 and 1.66 with (published,
# second hand); the further digits by the formula.
@pytest.mark.parametrize(
    ("x", "y", "b1", "b2", "R"),
    [(0, 1, 1.0, 1 / 2.85, 1.57), (1, 1, 2 / 2.85, 2 / 2.85, 1.651225), (1, 2, 2 / 2.85, 3 / 2.85, 1.661815982)],
)
def test_published_growth(x, y, b1, b2, R):
    solution = staged(x, y, b1, b2, R).solve()
    assert solution.R0 == close(R)
    # R was rounded to ten digits, which moves r by a few of its tenth.
    assert solution.growth_rate == pytest.approx(0.2, rel=5e-9)


@pytest.mark.parametrize("x", [0, 1, 3])
@pytest.mark.parametrize("y", [1, 2, 5])
@pytest.mark.parametrize("r", [0.31, -0.04])
def test_formula_for_stages(x, y, r):
    # Second route: the formula gives the R that belongs to r.
    b1, b2 = 0.7, 0.4
    R = (1 + r / b1) ** x * y / sum((1 + r / b2) ** -i for i in range(1, y + 1))
    solution = staged(x, y, b1, b2, R).solve()
    assert solution.R0 == pytest.approx(R, rel=1e-12)
    assert solution.growth_rate == pytest.approx(r, rel=1e-10)
    (only,) = solution.structure.classes
    assert only.growth_rate == pytest.approx(r, rel=1e-10)
    # Latent stages delay: they change the rate, never the number.
    assert solution.types_at_infection == (("E1",) if x else ("I1",))


def test_growth_of_the_seir_model():
    # b1 = sigma + mu, b2 = gamma + mu, r = 0.1554434801 give back 3.974128424.
    r = staged(1, 1, 0.2005, 0.1255, 3.974128424).solve().growth_rate
    assert r == close(0.1554434801, rel=3e-9)
    assert (1 + r / 0.2005) * (1 + r / 0.1255) == close(3.974128424, rel=3e-9)
