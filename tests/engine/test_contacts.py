"""Forms of contacts, reciprocity and orientation. Published numbers are from memory of the source, recomputed."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given

from ngm.engine.contacts import (
    ContactError,
    both_readings,
    per_head_of_pairs,
    per_head_of_totals,
    per_pair,
    reciprocal_contacts,
    reciprocity,
    total_contacts,
)
from ngm.engine.perron import reproduction_number, stable_distribution
from tests.engine.contact_data import C, N, contacts_and_sizes


# By hand: T = N_i C_ij, B = C_ij / N_j.
def test_forms():
    assert total_contacts(C, N).tolist() == [[2400, 1200], [1400, 4200]]
    assert per_pair(C, N) == pytest.approx(np.array([[8 / 300, 4 / 700], [2 / 300, 6 / 700]]), rel=1e-15)


@given(contacts_and_sizes())
def test_the_ways_back(given_contacts):
    C, N = given_contacts
    assert per_head_of_totals(total_contacts(C, N), N) == pytest.approx(C, rel=1e-14)
    assert per_head_of_pairs(per_pair(C, N), N) == pytest.approx(C, rel=1e-14)


# Published: Wallinga, Teunis & Kretzschmar (2006) for the correction; values of the example recomputed.
def test_correction():
    found = reciprocal_contacts(C, N)
    assert found == pytest.approx(np.array([[8, 4.333333333], [1.857142857, 6]]), rel=1e-9)
    assert reproduction_number(C) == pytest.approx(10, rel=1e-12)
    assert reproduction_number(found) == pytest.approx(10.00792604, rel=1e-9)


# By hand: 1200 and 1400 differ by 200, of a mean of 1300.
def test_gaps():
    found = reciprocity(C, N)
    assert found.gaps == pytest.approx(np.array([[0, -200 / 1300], [200 / 1300, 0]]), rel=1e-14)
    assert found.largest == pytest.approx(200 / 1300, rel=1e-14)
    assert found.overall == pytest.approx(200 / 1300, rel=1e-14)
    assert found.pair == (1, 0)


# By hand: pairs count 10 and 30 (gap 1), 1000 and 1000 (0), 5 and 0 (gap 2, the most there is); overall 25 of 1022.5.
def test_large_gaps_of_groups_that_hardly_meet_weigh_little():
    totals = np.array([[7, 10, 1000], [30, 7, 5], [1000, 0, 7]])
    sizes = np.array([2.0, 4.0, 5.0])
    found = reciprocity(per_head_of_totals(totals, sizes), sizes)
    assert found.gaps == pytest.approx(np.array([[0, -1, 0], [1, 0, 2], [0, -2, 0]]), rel=1e-12, abs=1e-15)
    assert (found.pair, found.largest) == ((1, 2), pytest.approx(2, rel=1e-14))
    assert found.overall == pytest.approx(25 / 1022.5, rel=1e-12)


@pytest.mark.parametrize(("C", "N"), [([[0, 0], [0, 0]], [1, 2]), ([[3]], [7]), ([[1, 4], [2, 5]], [10, 20])])
def test_reciprocal_contacts_have_no_gap(C, N):
    found = reciprocity(C, N)
    assert (found.largest, found.pair, found.overall) == (0, None, 0)


# Two sexes, two activity classes each, partners chosen in proportion to the contacts that they offer; men make
# 900 * 1.5 + 100 * 12 = 2550 contacts, women 950 * 1.6 + 50 * 20.6 = 2550. Published: Jacquez et al (1988), formula from
# memory, value recomputed: the sums of c^2 N / c N under a square root.
def test_two_sexes():
    N = np.array([900, 100, 950, 50.0])
    c = np.array([1.5, 12, 1.6, 20.6])
    C = np.zeros((4, 4))
    C[:2, 2:] = np.outer(c[:2], c[2:] * N[2:] / 2550)
    C[2:, :2] = np.outer(c[2:], c[:2] * N[:2] / 2550)
    assert reciprocity(C, N).largest < 1e-14
    assert reciprocity(C * np.array([1, 1, 1.1, 1.1])[:, None], N).largest == pytest.approx(0.1 / 1.05, rel=1e-12)
    # women infect men with 0.3 and stay infectious for 1, men infect women with 0.2 and for 0.5
    infectivity = np.array([0.2 * 0.5, 0.2 * 0.5, 0.3 * 1, 0.3 * 1])
    K = per_pair(C, N) * N[:, None] * infectivity[None, :]
    assert reproduction_number(K) == pytest.approx(1.338716785, rel=1e-9)


# Published: van den Driessche & Watmough (2002), section 4.2, equations from memory, values recomputed: S, B and
# d + g + e as there; density-dependent rates S_i B_ij I_j, so that B is the per-pair form.
@pytest.mark.parametrize(
    ("B", "R0"),
    [([[0.001, 0.0005], [0.0002, 0.0015]], 1.512894497), (np.outer([0.002, 0.001], [0.6, 1.1]), 2.347613715)],
)
def test_a_density_dependent_rate_takes_the_form_for_pairs(B, R0):
    S = np.array([20 * (0.02 * 0.6 + 0.1) / (0.02 * 0.15), 10 * (0.025 * 0.7 + 0.2) / (0.025 * 0.235)])
    assert pytest.approx([746.6666667, 370.2127660], rel=1e-9) == S
    stay = 1 / np.array([0.02 + 0.5 + 0.05, 0.025 + 0.4 + 0.1])
    C = per_head_of_pairs(B, S)
    assert reproduction_number(S[:, None] * per_pair(C, S) * stay) == pytest.approx(R0, rel=1e-9)
    assert reproduction_number(total_contacts(C, S) / S[None, :] * stay) == pytest.approx(R0, rel=1e-9)


# Recomputed by another route than ours: K_ij = q D N_i C'_ij / N_j with q D = 0.2. The shortcut q D C' has the same root and
# another case mix, and so has the transpose.
def test_orientation_shows_in_the_case_mix_and_not_in_R0():
    corrected = reciprocal_contacts(C, N)
    rows, columns = both_readings(corrected, N)
    K, turned = (0.2 * total_contacts(reading.C, N) / N[None, :] for reading in (rows, columns))
    assert pytest.approx(np.array([[1.6, 0.3714285714], [0.8666666667, 1.2]]), rel=1e-9) == K
    assert reproduction_number(K) == pytest.approx(2.001585208, rel=1e-9)
    assert reproduction_number(turned) == pytest.approx(2.001585208, rel=1e-9)
    assert stable_distribution(K) == pytest.approx([0.4804941148, 0.5195058852], rel=1e-9)
    assert stable_distribution(0.2 * corrected) == pytest.approx([0.6833553211, 0.3166446789], rel=1e-9)
    assert abs(stable_distribution(turned)[0] - stable_distribution(K)[0]) > 0.1
    susceptibility = np.array([1, 0.5])
    for scaled in (K * susceptibility[:, None], K * susceptibility[None, :]):
        assert reproduction_number(scaled) == pytest.approx(1.741055677, rel=1e-9)


# By hand: rows 12 and 8, columns 10 and 10; mean (300 * 12 + 700 * 8) / 1000; columns: 300 * 2 against 700 * 4 counted.
def test_both_readings():
    rows, columns = both_readings(C, N)
    assert (rows.makes, columns.makes) == ("rows", "columns")
    assert rows.contacts.tolist() == [12, 8]
    assert columns.contacts.tolist() == [10, 10]
    assert rows.mean == pytest.approx(9.2, rel=1e-15)
    assert columns.mean == pytest.approx(10, rel=1e-15)
    assert rows.reciprocity.largest == pytest.approx(200 / 1300, rel=1e-14)
    assert columns.reciprocity.largest == pytest.approx(2200 / 1700, rel=1e-14)
    assert columns.C.tolist() == C.T.tolist()


def test_without_sizes_nothing_is_said_of_reciprocity():
    rows, columns = both_readings(C)
    assert (rows.mean, rows.reciprocity, columns.mean, columns.reciprocity) == (None, None, None, None)
    assert columns.contacts.tolist() == [10, 10]


@given(contacts_and_sizes())
def test_corrected_is_reciprocal_and_stays(given_contacts):
    C, N = given_contacts
    corrected = reciprocal_contacts(C, N)
    assert reciprocity(corrected, N).largest < 1e-13
    assert reciprocal_contacts(corrected, N) == pytest.approx(corrected, rel=1e-13)
    # all contacts together are kept, and those inside a group exactly
    assert total_contacts(corrected, N).sum() == pytest.approx(total_contacts(C, N).sum(), rel=1e-13)
    assert np.diag(corrected).tolist() == np.diag(C).tolist()


@given(contacts_and_sizes())
def test_reciprocity_is_a_matter_of_ratios_and_of_pairs(given_contacts):
    C, N = given_contacts
    found = reciprocity(C, N)
    assert reciprocity(C, N * 1e9).gaps == pytest.approx(found.gaps, rel=1e-9, abs=1e-13)
    assert np.array_equal(found.gaps, -found.gaps.T)
    assert 0 <= found.overall <= found.largest * (1 + 1e-12) <= 2 * (1 + 1e-11)


def test_large_numbers():
    huge = np.full((2, 2), 1e300)
    assert reciprocity(huge, [1e300, 2e300]).largest == pytest.approx(2 / 3, rel=1e-14)
    assert reciprocal_contacts(huge, [1e300, 1e300]).tolist() == huge.tolist()
    with pytest.raises(ContactError, match="too large"):
        total_contacts(huge, [1e300, 1e300])
    with pytest.raises(ContactError, match="too large"):
        per_pair(huge, [1e-300, 1])


@pytest.mark.parametrize("function", [total_contacts, per_head_of_totals, per_pair, per_head_of_pairs, reciprocity])
@pytest.mark.parametrize(
    ("C", "N", "message", "index"),
    [
        ([[1, 2], [3, -4]], [1, 1], r"contacts\[1, 1\] = -4 is negative", (1, 1)),
        ([[1, np.nan], [3, 4]], [1, 1], r"contacts\[0, 1\] = nan is not finite", (0, 1)),
        ([[1, 2], [-np.inf, 4]], [1, 1], r"contacts\[1, 0\] = -inf is not finite", (1, 0)),
        ([[1, 2, 3], [4, 5, 6]], [1, 1], r"square matrix.* not of shape \(2, 3\)", ()),
        ([1, 2], [1, 1], r"not of shape \(2,\)", ()),
        ([[]], [1], "square matrix", ()),
        ([[1, 2], [3, 4]], [1, 0], "group 1 has no members: the size must be above 0", (1,)),
        ([[1, 2], [3, 4]], [-1, 1], "the size of group 0 = -1 is negative", (0,)),
        ([[1, 2], [3, 4]], [1, np.inf], "the size of group 1 = inf is not finite", (1,)),
        ([[1, 2], [3, 4]], [1, 2, 3], r"one value for each group, 2 in all, not shape \(3,\)", ()),
        ([[1, 2], [3, 4]], 5, r"not shape \(\)", ()),
    ],
)
def test_refusals(function, C, N, message, index):
    with pytest.raises(ContactError, match=message) as caught:
        function(C, N)
    assert caught.value.index == index


def test_what_is_given_stays_as_it_is():
    table, sizes = C.copy(), N.copy()
    reciprocal_contacts(table, sizes)
    both_readings(table, sizes)[0].C[0, 0] = 99
    assert np.array_equal(table, C)
    assert np.array_equal(sizes, N)
