"""The example scenarios, by hand: R0 from the rates in the comments, units converted here a second time."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

import ngm

SCENARIOS = Path(__file__).parents[1] / "scenarios"
WEEK, MONTH, YEAR = 7, 30.4375, 365.25


def solve(stem, **values):
    return ngm.solve(ngm.load(SCENARIOS / f"{stem}.toml").with_values(**values))


def test_seir():
    mu = 1 / (70 * YEAR)
    solution = solve("seir-velmar-fever")
    assert solution.R0 == pytest.approx(0.42 * 0.2 / ((0.2 + mu) * (1.4 / WEEK + mu)), rel=1e-12)
    assert solution.infection_free["S"] == pytest.approx(2 / mu, rel=1e-12)


def by_midges(a=0.3, mu_v=0.06):
    mu_h, sigma_v = 1 / (65 * YEAR), 1 / 9
    to_people = a * 0.3 * sigma_v / (sigma_v + mu_v) / mu_v
    to_midges = a * 0.25 * (9000 / mu_v) / (1.1 / mu_h) * (1 / 6) / (1 / 6 + mu_h) / (1 / 7 + mu_h)
    return to_people * to_midges


def test_vector_borne():
    solution = solve("vector-borne-ostrel-fever")
    assert solution.structure.period == 2
    assert solution.per_cycle == pytest.approx(by_midges(), rel=1e-12)
    assert solution.R0 == pytest.approx(math.sqrt(by_midges()), rel=1e-12)
    # Half the bites: the cycle number falls to a quarter. `a` is typed per week.
    nets = solve("vector-borne-ostrel-fever", a=1.05)
    assert nets.per_cycle == pytest.approx(solution.per_cycle / 4, rel=1e-12)
    assert solve("vector-borne-ostrel-fever", mu_v=0.09).per_cycle == pytest.approx(by_midges(mu_v=0.09), rel=1e-12)


def test_below_one_and_still_there():
    # By hand: S = (mu + theta)/(mu + theta + phi) N without infection, R = beta (S + leak V)/((gamma + mu) N).
    drive = solve("leaky-vaccine-fenmoor-itch", phi=0.05)
    assert drive.R0 == pytest.approx(0.7 * (0.0025 + 0.15 * 0.05) / 0.0525 / 0.152, rel=1e-12)
    assert solve("leaky-vaccine-fenmoor-itch").R0 == pytest.approx(0.7 / 0.152, rel=1e-12)


def test_a_season():
    # By hand, of the averaged season alone: midges emergence/mu_v, a and emergence at their means (both factors 1).
    mu = 1 / (64 * YEAR)
    people = 1.5 / mu
    to_people = 0.21 * 0.4 * 0.1 / 0.17 / 0.07
    to_midges = 0.21 * 0.4 * (7000 / 0.07) / people * 0.2 / (0.2 + mu) / (1 / 6 + mu)
    assert solve("seasonal-midges-sallow-fever").season.averaged == pytest.approx(
        math.sqrt(to_people * to_midges), rel=1e-12
    )


def test_two_strains():
    mu = 1 / (60 * YEAR)
    solution = solve("two-strains-brindle-cough")
    classes = {c.types[0]: c for c in solution.structure.classes}
    assert classes["A"].R0 == pytest.approx(0.18 / (0.05 + mu), rel=1e-12)
    assert classes["B"].R0 == pytest.approx(0.55 / (0.2 + mu), rel=1e-12)
    assert solution.R0 == classes["A"].R0
    assert classes["B"].growth_rate == pytest.approx(0.55 - 0.2 - mu, rel=1e-12)
    assert classes["B"].growth_rate > classes["A"].growth_rate


def test_waterborne():
    mu = 1 / (55 * YEAR)
    by_water = 0.25 * 12000 / 50000 * 1.1 / (2.1 / WEEK)
    assert solve("waterborne-karsk-flux").R0 == pytest.approx((0.06 + by_water) / (0.12 + mu), rel=1e-12)


def test_staged():
    # Expected visits and stays of one case, as a chain: acute, silent, late, on treatment.
    n1, n2, tau, rho, d3, mu = YEAR / (10 * WEEK), 0.12, 0.30, 0.05, 0.5, 0.02
    leave = np.array([n1 + mu, n2 + tau + mu, tau + d3 + mu, rho + mu])
    step = np.array([[0, n1, 0, 0], [0, 0, n2, tau], [0, 0, 0, tau], [0, rho, 0, 0]]) / leave[:, None]
    visits = np.linalg.inv(np.eye(4) - step)[0]
    infects = np.array([2.4, 0.11, 0.45, 0.11 * 0.1])
    solution = solve("staged-chronic-hollin-disease")
    assert solution.R0 == pytest.approx(float(infects @ (visits / leave)), rel=1e-12)
    assert "D" not in solution.types


def test_age_groups():
    C = np.array([[2.1, 1.4, 5.2, 0.6], [0.7, 5.4, 5.0, 0.5], [0.5, 1.3, 9.4, 1.1], [0.2, 0.4, 3.3, 2.4]])
    N = np.array([60000.0, 140000, 620000, 180000])
    total = C * N[:, None]
    C = (total + total.T) / 2 / N[:, None]
    K = 0.028 / 0.2 * np.array([0.9, 1.0, 1.0, 1.3])[:, None] * N[:, None] * C / N
    solution = solve("age-groups-ember-cough")
    assert np.array(solution.K) == pytest.approx(K, rel=1e-12)
    assert solution.R0 == pytest.approx(max(abs(np.linalg.eigvals(K))), rel=1e-12)
    assert solution.types_at_infection[-1] == "E[65+]"


def test_age_groups_tell_what_their_comments_say():
    scenario = ngm.load(SCENARIOS / "age-groups-ember-cough.toml")
    T = {number.types: number.T for number in ngm.control(scenario).type_reproduction}
    assert T["E[0-4]", "E[5-17]"] is None
    # By hand from K: the root of the adults' loop, direct and through the others.
    K = np.array(ngm.solve(scenario).K)
    rest = [0, 1, 3]
    through = K[2, rest] @ np.linalg.solve(np.eye(3) - K[np.ix_(rest, rest)], K[rest, 2])
    assert T[("E[18-64]",)] == pytest.approx(K[2, 2] + through, rel=1e-12)
    adults = ngm.coverage_needed(scenario, ["18-64"], efficacy=0.7)
    assert adults.coverage == pytest.approx((1 - 1 / (K[2, 2] + through)) / 0.7, rel=1e-12)
    assert adults.coverage < 1
    packages = ngm.compare(scenario)
    assert len(packages.interventions) == 5
    assert not any("reciprocal" in warning for warning in packages.warnings)
    assert 0 < sum(row.below_one for row in packages.interventions) < 5


def towns(moves, sick):
    """Return R0 of the three towns: V^-1 of latent and infectious, solved together."""
    mu, sigma, gamma = 1 / (62 * YEAR), 0.25, 1.2 / WEEK
    generator = np.diag(moves.sum(1)) - moves.T  # people leave a row for a column
    generator_sick = np.diag(sick.sum(1)) - sick.T
    latent = np.linalg.inv(np.eye(3) * (sigma + mu) + generator)
    infectious = np.linalg.inv(np.eye(3) * (gamma + mu) + generator_sick)
    return max(abs(np.linalg.eigvals(np.diag([0.45, 0.25, 0.12]) @ infectious @ (sigma * latent))))


MOVES = np.array([[0, 0.010, 0.002], [0.015, 0, 0.004], [0.006, 0.008, 0]])
SICK = np.array([[0, 0.002, 0], [0.009, 0, 0.001], [0.003, 0.002, 0]])


def test_three_towns():
    solution = solve("three-towns-torvane-fever")
    assert solution.R0 == pytest.approx(towns(MOVES, SICK), rel=1e-12)
    mu = 1 / (62 * YEAR)
    at_rest = np.linalg.solve(np.eye(3) * mu + np.diag(MOVES.sum(1)) - MOVES.T, [3.0, 1.2, 0.4])
    assert [solution.infection_free[f"S[{t}]"] for t in ("Torvane", "Ilmeth", "Osk")] == pytest.approx(
        at_rest, rel=1e-11
    )
    # What the note of the last intervention says: closing the roads out of the dense town raises the number.
    assert towns(MOVES * [[0], [1], [1]], SICK * [[0], [1], [1]]) > solution.R0


def test_age_by_region():
    # Four kinds of people, in the order child-North, child-South, adult-North, adult-South.
    births, grow = np.array([1.6, 0.9]), 0.0001825
    mu = np.array([1 / 2000, 1 / 55]) / YEAR
    child = births / (grow + mu[0])
    N = np.array([*child, *(grow * child / mu[1])])
    meets = [np.array([[7.0, 3.0], [0.9, 6.0]]), np.array([[4.5, 2.5], [0.8, 4.0]])]
    visits = np.array([[0.95, 0.05], [0.12, 0.88]])
    kinds = [(a, r) for a in (0, 1) for r in (0, 1)]
    susceptibility = [1.4, 1.0]
    F = np.array(
        [
            [0.03 * susceptibility[a] * N[i] * meets[r][a, b] * visits[r, s] / N[j] for j, (b, s) in enumerate(kinds)]
            for i, (a, r) in enumerate(kinds)
        ]
    )
    growing = np.array([[grow if (a, b, r) == (1, 0, s) else 0 for b, s in kinds] for a, r in kinds])
    leave = np.array([mu[a] + (grow if a == 0 else 0) for a, _ in kinds])
    gamma = np.array([[0.14, 0.18][a] for a, _ in kinds])
    latent = np.linalg.inv(np.diag(0.1 + leave) - growing)
    infectious = np.linalg.inv(np.diag(gamma + leave) - growing)
    solution = solve("age-by-region-lantern-rash")
    assert solution.types[:4] == tuple(f"E[{a},{r}]" for a in ("child", "adult") for r in ("Northholm", "Southholm"))
    assert np.array(solution.K) == pytest.approx(F @ infectious @ (0.1 * latent), rel=1e-11)


def test_vaccination():
    # In weeks. Share still protected: coverage mu/(mu + omega).
    mu, omega = WEEK / (70 * YEAR), WEEK / (12 * YEAR)
    basic = 0.6 * WEEK / (1 + mu)

    def number(coverage):
        share = coverage * mu / (mu + omega)
        return basic * (1 - share + share * 0.2 * 0.5)

    assert solve("vaccination-copper-spots").R0 == pytest.approx(number(0.85), rel=1e-12)
    assert solve("vaccination-copper-spots", coverage=0).R0 == pytest.approx(basic, rel=1e-12)
    # As its summary says: not even the whole coverage is enough. `coverage` is typed in per cent.
    assert solve("vaccination-copper-spots", coverage=100).R0 > 1


def test_livestock():
    # In months: sick, carriers, ground; new infections arrive in the sick and in the carriers (lambs).
    beta, culling = 0.09 * MONTH / WEEK, 0.3 * MONTH / YEAR
    F = np.array([[beta, 0.1 * beta, 0.00008 * 240], [0, 0.025 * 0.15, 0], [0, 0, 0]])
    V = np.array([[0.8 + culling + 0.1, 0, 0], [-0.8, culling, 0], [-1.5, -0.3, 0.35]])
    solution = solve("livestock-pasture-grimble")
    assert solution.R0 == pytest.approx(max(abs(np.linalg.eigvals(F @ np.linalg.inv(V)))), rel=1e-11)
    assert solution.types_at_infection == ("I", "C")


def test_two_hosts():
    hare, goat = 0.02 + 0.04 * WEEK, 0.3 + 0.3 * WEEK / YEAR
    K = np.array([[0.5 / hare, 0.05 / goat, 0], [0.4 / hare, 0.2 / goat, 0], [0, 0.02 / goat, 0]])
    solution = solve("two-hosts-heath-murrain")
    assert np.array(solution.K) == pytest.approx(K, rel=1e-12)
    assert [c.types for c in solution.structure.classes] == [("I_w", "I_g"), ("I_p",)]
    assert solution.structure.classes[1].R0 == 0


def test_weekly_steps():
    # By hand: mean stays in whole steps, 1/0.6 at home and 0.15/0.6 of them 1/0.5 in the sick bay.
    solution = solve("weekly-steps-tarn-croup")
    assert solution.R0 == pytest.approx(0.9 * 0.9 * (1 + 0.15 * 0.2 / 0.5) / 0.6, rel=1e-12)
    F = np.array([[0, 0.81, 0.162], [0, 0, 0], [0, 0, 0]])
    T = np.array([[0.25, 0, 0], [0.75, 0.4, 0], [0, 0.15, 0.5]])
    assert solution.growth_factor == pytest.approx(max(abs(np.linalg.eigvals(F + T))), rel=1e-12)
    assert solution.growth_rate == pytest.approx(math.log(solution.growth_factor), rel=1e-12)
    # As its comments say: read as rates that leave the same shares, the twin lies below 1.
    twin = ngm.twin(ngm.load(SCENARIOS / "weekly-steps-tarn-croup.toml"))
    home, bay = -math.log(0.4), math.log(2)
    assert twin.versions[1].R0 == pytest.approx(0.81 * (1 / home + 0.25 * 0.2 / bay), rel=1e-12)
    assert twin.versions[1].R0 < 1 < twin.versions[0].R0


def test_wards_and_burials():
    home = 0.15 + 0.07 + 0.08
    ward = 0.15 / home
    dead = 0.07 / home + ward * 0.06 / 0.18
    expected = 0.16 / home + ward * 0.08 / 0.18 + dead * 0.5 * 2
    assert solve("wards-and-burials-moss-fever").R0 == pytest.approx(expected, rel=1e-12)


def test_sixteen_ages():
    # The CSV files read a second way, balanced by hand; ages differ in susceptibility only, so K is a product.
    people = np.array([4.1, 4.3, 4.5, 4.7, 4.9, 5.2, 5.6, 5.9, 5.8, 5.4, 5.6, 5.9, 5.3, 4.6, 3.9, 6.1]) * 1000
    total = np.zeros((16, 16))
    for setting in ("school", "elsewhere"):
        lines = (SCENARIOS / f"sixteen-ages-marl-cough-{setting}.csv").read_text(encoding="utf-8").splitlines()[1:]
        total += people[:, None] * np.array([[float(cell) for cell in line.split(",")[1:]] for line in lines])
    contacts = (total + total.T) / 2 / people[:, None]
    susceptibility = np.array([0.8] * 3 + [0.9] + [1] * 9 + [1.2] * 3)
    K = 0.06 * 4 * (susceptibility * people)[:, None] * contacts / people
    assert solve("sixteen-ages-marl-cough").R0 == pytest.approx(max(abs(np.linalg.eigvals(K))), rel=1e-11)


def test_ticks_and_mice():
    # By hand: larva and vole make a class of two types, [[k, up], [m, 0]]; ticks infected as nymphs infect nobody.
    k, up, m = 0.1 * 0.5 * 12 * 0.35, 20 * 2.8 * 0.5, 0.1 * 0.5 * 0.8
    solution = solve("ticks-and-mice-quill-fever")
    assert solution.R0 == pytest.approx((k + math.sqrt(k * k + 4 * up * m)) / 2, rel=1e-14)
    assert solution.types_at_infection == ("tick infected as larva", "tick infected as nymph", "vole")
    assert solution.left[1] == 0
    rows = {
        row.name: row.R0 for row in ngm.compare(ngm.load(SCENARIOS / "ticks-and-mice-quill-fever.toml")).interventions
    }
    assert rows["Bait with vaccine"] == pytest.approx((k + math.sqrt(k * k + 4 * up * m * 0.5)) / 2, rel=1e-14)
    assert rows["More deer"] == pytest.approx((0.8 * k + math.sqrt((0.8 * k) ** 2 + 4 * up * m * 0.8)) / 2, rel=1e-14)


def test_stages_of_mosquitoes():
    # By hand: eggs by one adult, times the chance of each stage, a geometric sum where members wait.
    eggs = 60 * 1.2 * 0.5
    R0 = eggs * 0.4 / (1 - 0.3) * 0.15 / (1 - 0.35) * 0.6 / (1 - 0.45)
    solution = solve("mosquito-stages-saltings")
    assert solution.R0 == pytest.approx(R0, rel=1e-14)
    # Second route: a general routine for eigenvalues.
    A = np.diag([0.3, 0.35, 0, 0.45]) + np.diag([0.4, 0.15, 0.6], -1)
    A[0, 3] = eggs
    assert solution.growth_factor == pytest.approx(max(np.linalg.eigvals(A).real), rel=1e-12)
    rows = {
        row.name: row.R0 for row in ngm.compare(ngm.load(SCENARIOS / "mosquito-stages-saltings.toml")).interventions
    }
    assert rows["Sterile males"] == pytest.approx(0.3 * R0, rel=1e-14)
    assert rows["Larvicide"] == pytest.approx(0.33 * R0, rel=1e-14)
    assert rows["Spraying of adults"] == pytest.approx(R0 * 0.55 / (1 - 0.135), rel=1e-14)
