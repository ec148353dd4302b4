"""Settings added, contacts carried to another population, groups merged."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ngm.engine.composition import adapted_contacts, merge_groups, sum_of_settings
from ngm.engine.contacts import ContactError, per_pair, reciprocal_contacts, reciprocity, total_contacts
from ngm.engine.perron import reproduction_number, reproductive_value, stable_distribution
from tests.engine.contact_data import SIZE, C, N, contacts_and_sizes

# An example of ours for N = (300, 700): home, school, work, other; roots, losses and shares recomputed.
SETTINGS = np.array([[[2, 1.4], [0.6, 1.5]], [[5, 0.7], [0.3, 0.2]], [[0, 0.35], [0.15, 2.5]], [[1, 1.4], [0.6, 1.8]]])


def test_settings():
    together = sum_of_settings(SETTINGS)
    R0 = reproduction_number(together)
    assert [reproduction_number(setting) for setting in SETTINGS] == pytest.approx(
        [2.7, 5.043358345, 2.520826503, 2.4], rel=1e-9
    )
    assert R0 == pytest.approx(9.711549373, rel=1e-9)
    losses = [1 - reproduction_number(sum_of_settings(SETTINGS, 1 - without)) / R0 for without in np.eye(4)]
    assert losses == pytest.approx([0.2770882532, 0.2902791870, 0.07725247529, 0.2041468782], rel=1e-9)
    left, right = reproductive_value(together), stable_distribution(together)
    shares = [left @ setting @ right / R0 for setting in SETTINGS]
    assert shares == pytest.approx([0.2774129619, 0.4027224086, 0.1031747639, 0.2166898656], rel=1e-9)
    assert sum(shares) == pytest.approx(1, rel=1e-12)


# By hand.
def test_factors():
    assert sum_of_settings(SETTINGS, [1, 0.6, 0, 2]) == pytest.approx(np.array([[7, 4.62], [1.98, 5.22]]), rel=1e-14)
    assert sum_of_settings([C]).tolist() == C.tolist()
    assert sum_of_settings([C, C], [0, 0]).tolist() == [[0, 0], [0, 0]]


@given(contacts_and_sizes(), st.data())
def test_R0_of_reciprocal_settings_is_at_most_the_sum(given_contacts, data):
    C, N = given_contacts
    other = data.draw(st.permutations(range(len(N))))
    settings = [reciprocal_contacts(C, N), reciprocal_contacts(C[np.ix_(other, other)], N)]
    most = sum(reproduction_number(setting) for setting in settings)
    assert reproduction_number(sum_of_settings(settings)) <= most * (1 + 1e-10)


# By hand: without reciprocity it can be more, 0 + 0 gives sqrt(4 * 9).
def test_R0_of_other_settings_may_be_more_than_the_sum():
    apart = [[[0, 4], [0, 0]], [[0, 0], [9, 0]]]
    assert [reproduction_number(np.array(setting)) for setting in apart] == [0, 0]
    assert reproduction_number(sum_of_settings(apart)) == pytest.approx(6, rel=1e-12)


# Published, second hand: Jarvis et al (2020) BMC Med. 18:124, contacts 10.8 to 2.8 a day, R0 2.6 to 0.62. R0 fell further
# than contacts: an eigenvalue and no mean. Ours does too where school contacts go, and the other way where work does.
def test_R0_falls_by_another_factor_than_contacts():
    assert 0.62 / 2.6 != pytest.approx(2.8 / 10.8, rel=0.05)

    def left(factors):
        now, before = sum_of_settings(SETTINGS, factors), sum_of_settings(SETTINGS)
        contacts = total_contacts(now, N).sum() / total_contacts(before, N).sum()
        return reproduction_number(now) / reproduction_number(before) - contacts

    assert left([1, 0, 1, 1]) < -0.01
    assert left([1, 1, 0, 1]) > 0.01
    assert left([0.4, 0.4, 0.4, 0.4]) == pytest.approx(0, abs=1e-12)


# By hand. C is reciprocal for (20, 20); B = C/20; 60 instead of 40 members.
@pytest.mark.parametrize(
    ("method", "expected"),
    [
        # 2 * 20 and 2 * 40 contacts counted, 60 in the mean
        ("reciprocity", [[6, 3], [1.5, 2]]),
        # B N' 40/60
        ("density", [[4, 8 / 3], [4 / 3, 8 / 3]]),
        # (20 * 20/3 + 40 * 4)/60 = 44/9 contacts in the mean, were 6
        ("density_mean_kept", [[54 / 11, 36 / 11], [18 / 11, 36 / 11]]),
    ],
)
def test_another_population(method, expected):
    found = adapted_contacts([[6, 2], [2, 2]], [20, 20], [20, 40], method)
    assert found == pytest.approx(np.array(expected), rel=1e-14)


@pytest.mark.parametrize("method", ["reciprocity", "density", "density_mean_kept"])
@given(given_contacts=contacts_and_sizes(), data=st.data())
def test_contacts_in_another_population_are_reciprocal(method, given_contacts, data):
    C, N = given_contacts
    other = np.array(data.draw(st.lists(SIZE, min_size=len(N), max_size=len(N))))
    found = adapted_contacts(C, N, other, method)
    assert reciprocity(found, other).largest < 1e-12
    # a population that only grows keeps its (balanced) contacts, and the way there and back changes nothing
    balanced = reciprocal_contacts(C, N)
    assert adapted_contacts(C, N, 7 * N, method) == pytest.approx(balanced, rel=1e-10)
    if method == "density":
        assert found == pytest.approx(adapted_contacts(balanced, N, other, method), rel=1e-10)
        assert adapted_contacts(found, other, N, method) == pytest.approx(balanced, rel=1e-10)
        # the preference of each pair, its rate relative to the mean rate of all pairs, is kept
        pairs, pairs_before = per_pair(found, other) * other.sum(), per_pair(balanced, N) * N.sum()
        assert pairs == pytest.approx(pairs_before, rel=1e-10)
    if method == "density_mean_kept":
        mean, mean_before = (total_contacts(x, n).sum() / n.sum() for x, n in ((found, other), (C, N)))
        assert mean == pytest.approx(mean_before, rel=1e-10)


# By hand: of 30 in the first two groups, 10 have 1 + 2 and 20 have 1 + 3 contacts inside: (10 * 3 + 20 * 4)/30.
def test_merging():
    contacts, sizes = merge_groups([[1, 2, 1], [1, 3, 2], [1, 4, 5]], [10, 20, 10], [1, 1, 0])
    assert sizes.tolist() == [10, 30]
    assert contacts == pytest.approx(np.array([[5, 5], [50 / 30, 110 / 30]]), rel=1e-14)


@given(contacts_and_sizes(), st.data())
def test_merged_totals_add_up(given_contacts, data):
    C, N = given_contacts
    numbers = data.draw(st.lists(st.integers(0, len(N) - 1), min_size=len(N), max_size=len(N)))
    merged = np.unique(numbers, return_inverse=True)[1]
    contacts, sizes = merge_groups(C, N, merged)
    totals, before = total_contacts(contacts, sizes), total_contacts(C, N)
    for i in range(len(sizes)):
        assert sizes[i] == pytest.approx(sum(N[k] for k in range(len(N)) if merged[k] == i), rel=1e-13)
        for j in range(len(sizes)):
            expected = sum(
                before[k, m] for k in range(len(N)) for m in range(len(N)) if (merged[k], merged[m]) == (i, j)
            )
            assert totals[i, j] == pytest.approx(expected, rel=1e-12)
    balanced, sizes = merge_groups(reciprocal_contacts(C, N), N, merged)
    assert reciprocity(balanced, sizes).largest < 1e-12


# Merging groups whose members do not differ keeps R0 (lumping), merging others does not.
def test_merging_and_R0():
    alike = np.array([[1, 3, 2], [2, 2, 2], [1, 1, 4.0]])
    contacts, _ = merge_groups(alike, [5, 9, 10], [0, 0, 1])
    assert reproduction_number(contacts) == pytest.approx(reproduction_number(alike), rel=1e-12)
    different = np.diag([1, 9, 2.0])
    assert reproduction_number(merge_groups(different, [5, 9, 10], [0, 0, 1])[0]) < 9


# Published: Mossong et al (2008) PLoS Med. 5:e74: 7,290 participants reported 97,904 contacts. Participants and mean
# contacts of the eight countries from memory, to 0.01, so their sum is good to 0.005 a participant.
def test_the_means_of_a_survey_merge_into_its_mean():
    participants = [750, 1341, 1006, 1012, 849, 1051, 269, 1012]
    means = [11.84, 7.95, 11.06, 11.74, 19.77, 17.46, 13.85, 16.31]
    contacts, sizes = merge_groups(np.diag(means), participants, np.zeros(8, dtype=int))
    assert sizes.tolist() == [7290]
    assert total_contacts(contacts, sizes)[0, 0] == pytest.approx(97904, abs=0.005 * 7290)


@pytest.mark.parametrize(
    ("act", "message", "index"),
    [
        (lambda: sum_of_settings([]), "there is no setting", ()),
        (lambda: sum_of_settings([C, [[1, 2], [-3, 4]]]), r"setting 1: contacts\[1, 0\] = -3 is negative", (1, 1, 0)),
        (lambda: sum_of_settings([C, [[1]]]), "setting 1 has 1 groups, setting 0 has 2", ()),
        (lambda: sum_of_settings([C, [1]]), "setting 1: contacts are a square matrix", ()),
        (lambda: sum_of_settings([C, C], [1]), "the factor: expected one value for each setting, 2 in all", ()),
        (lambda: sum_of_settings([C, C], [1, -1]), "the factor of setting 1 = -1 is negative", (1,)),
        (lambda: sum_of_settings([C], [1e308]), "too large", ()),
        (lambda: adapted_contacts(C, N, [1, 0]), "group 1 has no members: the size in the other population", (1,)),
        (lambda: adapted_contacts(C, N, [1, 2, 3]), "the size in the other population: expected one value", ()),
        (lambda: adapted_contacts(C, [0, 1], N), "group 0 has no members", (0,)),
        (lambda: adapted_contacts([[-1, 0], [0, 0]], N, N), r"contacts\[0, 0\] = -1", (0, 0)),
        (lambda: merge_groups(C, N, [0, 2]), "no group goes into merged group 1", ()),
        (lambda: merge_groups(C, N, [1, 1]), "no group goes into merged group 0", ()),
        (lambda: merge_groups(C, N, [0, 10**9]), "no group goes into merged group 1", ()),
        (lambda: merge_groups(C, N, [0, -1]), "one for each of the 2 groups", ()),
        (lambda: merge_groups(C, N, [0]), "one for each of the 2 groups", ()),
        (lambda: merge_groups(C, N, [0, 0.5]), "one for each of the 2 groups", ()),
        (lambda: merge_groups(C, [1, 0], [0, 0]), "group 1 has no members", (1,)),
    ],
)
def test_refusals(act, message, index):
    with pytest.raises(ContactError, match=message) as caught:
        act()
    assert caught.value.index == index


def test_an_unknown_method_is_refused():
    with pytest.raises(
        ValueError, match="there is no method 'guess': choose reciprocity, density or density_mean_kept"
    ):
        adapted_contacts(C, N, N, "guess")
