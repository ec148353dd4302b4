"""Contact matrices of a scenario: reciprocity, assortativity, and the case mix that shows what R0 cannot."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from ngm.analysis.groups import host_groups
from ngm.analysis.matrices import as_floats, population
from ngm.analysis.numbers import Numbers, decided_numbers
from ngm.analysis.variation import MOST_VARIED, Outcome, Variation, contact_matrices
from ngm.engine.balls import nearest, precision
from ngm.engine.contacts import ContactError, FloatArray, both_readings, reciprocal_contacts, reciprocity
from ngm.engine.mixing import assortativity_coefficient, assortativity_index
from ngm.errors import Problem, ScenarioError
from ngm.results import Matrix, Vector
from ngm.results_mixing import Gaps, MixCase, Mixing, Reading
from ngm.scenario.fields import closest, listed, short
from ngm.scenario.model import Matrix as ContactMatrix
from ngm.scenario.model import Scenario

__all__ = ["Chosen", "Shares", "checked_factors", "choose", "contact_readings", "mixing", "rows_of", "shares"]

#: Where a matrix is wanted and a scenario has none.
NO_MATRIX = (
    "the scenario has no contact matrix. Give hosts groups under [dimensions] and contacts under [matrices.NAME], and use "
    "them in a rate: S * NAME(I / N)."
)


@dataclass(frozen=True)
class Chosen:
    """One square table of contacts: its matrix, and the group of the other dimension where it is given within one."""

    matrix: ContactMatrix
    block: int | None
    within: str | None
    groups: tuple[str, ...]

    @property
    def name(self) -> str:
        """Name of the matrix."""
        return self.matrix.name

    def table_of(self, tables: Mapping[str, FloatArray]) -> FloatArray:
        """Return this table from all matrices."""
        whole = tables[self.name]
        return whole if self.block is None else whole[self.block]

    def put_into(self, tables: Mapping[str, FloatArray], table: FloatArray) -> FloatArray:
        """Return the whole matrix with another table in this place."""
        if self.block is None:
            return table
        whole = tables[self.name].copy()
        whole[self.block] = table
        return whole


def choose(scenario: Scenario, matrix: str | None, within: str | None) -> Chosen:
    """Return a table of contacts by name, the first where none is named; refuse what is none."""
    settings = contact_matrices(scenario)
    if not settings:
        raise ScenarioError(Problem("matrices", NO_MATRIX, key=("matrices",)))
    name = settings[0] if matrix is None else matrix
    if name not in settings:
        hint = closest(name, settings) or f" There are {listed(list(settings))}."
        raise ScenarioError(Problem("matrices", f"'{short(name)}' is no contact matrix of this scenario.{hint}"))
    found = scenario.matrices[name]
    groups = scenario.dimensions[found.by].groups
    if found.within is None:
        if within is not None:
            raise ScenarioError(Problem(f"matrices.{name}", f"is one matrix, and not one for each group ('{within}')."))
        return Chosen(found, None, None, groups)
    others = scenario.dimensions[found.within].groups
    place = others[0] if within is None else within
    if place not in others:
        hint = closest(place, others) or f" There are {listed(list(others))}."
        raise ScenarioError(Problem(f"matrices.{name}", f"'{short(place)}' is no group of {found.within}.{hint}"))
    return Chosen(found, others.index(place), place, groups)


@dataclass(frozen=True)
class Shares:
    """How a vector over the types at infection is summed by the groups of one dimension.

    `labels`: the groups, and types without this dimension after them; `rows[k]`: the place of type k among them.
    """

    labels: tuple[str, ...]
    rows: tuple[int, ...]

    def of(self, right: FloatArray | None) -> Vector | None:
        """Return the sums."""
        if right is None:
            return None
        out = np.zeros(len(self.labels))
        np.add.at(out, list(self.rows), right)
        return tuple(out.tolist())


def shares(found: Numbers | Variation, by: str) -> Shares:
    """Return how the case mix is summed by the groups of a dimension."""
    scenario, template = found.scenario, found.template
    groups = scenario.dimensions[by].groups
    labels = list(groups)
    places: list[int] = []
    every = [(name, copy) for name in template.infected for copy in scenario.copies(template.by(name))]
    for k in found.at.tolist():
        name, copy = every[k]
        dimensions = template.by(name)
        if by in dimensions:
            places.append(groups.index(copy[dimensions.index(by)]))
            continue
        if name not in labels[len(groups) :]:
            labels.append(name)
        places.append(labels.index(name, len(groups)))
    return Shares(tuple(labels), tuple(places))


def mixing(
    scenario: Scenario,
    matrix: str | None = None,
    within: str | None = None,
    *,
    factors: Mapping[str, float] | None = None,
) -> Mixing:
    """Return a contact matrix looked at, with R0 and the case mix as it is, balanced, and read the other way round.

    R0 cannot reveal a transposed matrix: a matrix and its transpose have the same root, and nearly the same where both
    susceptibility and infectiousness differ between groups. The case mix differs. (Balanced after it was transposed, a
    matrix has another root.)

    Parameters
    ----------
    matrix : str, optional
        Name of a matrix of contacts; the first where left out.
    within : str, optional
        The group whose matrix is meant, for one given within another dimension.
    factors : mapping of str to float, optional
        Matrix of contacts -> what multiplies it: one more case, "with these factors". As an intervention that
        multiplies them, so on the matrices as balanced.

    Raises
    ------
    ngm.ScenarioError
        No matrix of contacts, none of this name, or a factor that is none.
    ngm.DerivationError
        As `ngm.solve`.

    References
    ----------
    Wallinga, Teunis & Kretzschmar (2006) Am. J. Epidemiol. 164:936-944; Gupta, Anderson & May (1989) AIDS 3:807-817
    (from memory); Newman (2003) Phys. Rev. E 67:026126
    """
    chosen = choose(scenario, matrix, within)
    wanted = checked_factors(scenario, factors or {})
    found = decided_numbers(scenario)
    by = shares(found, chosen.matrix.by)
    warnings = list(scenario.warnings)
    with precision(found.bits):
        # The numbers of `solve`, to the last digit.
        R0 = None if found.no_R0 is not None else 0.0 if found.spectrum is None else nearest(found.spectrum.root)
        right = None if found.spectrum is None else found.spectrum.right
        here = Outcome(R0, None if right is None else as_floats(right), None, found.no_R0)
        if R0 is not None and right is None:
            here = Outcome(R0, why="the case mix is not unique: several classes tie, or R0 is 0")
        sizes, sizes_from = _sizes(found, chosen)
        tables = {name: as_floats(table) for name, table in found.point.matrices.items()}
        table = chosen.table_of(tables)
        given = chosen.table_of({name: as_floats(values) for name, values in found.plain_matrices.items()})
    cases = [_case("balanced" if chosen.matrix.reciprocal else "as given", True, here, by, chosen)]
    if len(found.template.types) <= MOST_VARIED:
        cases += _others(Variation(scenario), chosen, given, sizes, wanted, by)
    else:
        warnings.append(f"{len(found.template.types)} types: other matrices are tried for up to {MOST_VARIED}.")
    return Mixing(
        title=scenario.title,
        time_unit=scenario.time_unit,
        digest=scenario.digest,
        matrix=chosen.name,
        label=chosen.matrix.label,
        by=chosen.matrix.by,
        within=chosen.within,
        others=() if chosen.matrix.within is None else scenario.dimensions[chosen.matrix.within].groups,
        settings=contact_matrices(scenario),
        groups=chosen.groups,
        table=rows_of(table),
        given=rows_of(given),
        row_sums=tuple(table.sum(axis=1).tolist()),
        column_sums=tuple(table.sum(axis=0).tolist()),
        sizes=None if sizes is None else tuple(sizes.tolist()),
        sizes_from=sizes_from,
        reciprocal=chosen.matrix.reciprocal,
        gaps=_gaps(given, sizes, chosen.groups),
        assortativity=assortativity_index(table),
        coefficient=None if sizes is None else assortativity_coefficient(table, sizes),
        mix_labels=by.labels,
        cases=tuple(cases),
        warnings=tuple(dict.fromkeys(warnings)),
    )


def _others(
    varied: Variation,
    chosen: Chosen,
    given: FloatArray,
    sizes: FloatArray | None,
    factors: Mapping[str, float],
    by: Shares,
) -> list[MixCase]:
    """Return the cases that are not in force."""
    out = []

    def with_table(name: str, table: FloatArray) -> None:
        outcome = varied.outcome({chosen.name: chosen.put_into(varied.tables, table)})
        out.append(_case(name, False, outcome, by, chosen))

    if chosen.matrix.reciprocal:
        with_table("as given", given)
    elif sizes is not None:
        with_table("balanced", reciprocal_contacts(given, sizes))
    with_table("transposed", chosen.table_of(varied.tables).T.copy())
    if chosen.matrix.reciprocal and sizes is not None:
        with_table("transposed, then balanced", reciprocal_contacts(given.T.copy(), sizes))
    if factors:
        tables = {name: factor * varied.tables[name] for name, factor in factors.items()}
        out.append(_case("with these factors", False, varied.outcome(tables), by, chosen))
    return out


def _case(name: str, in_force: bool, outcome: Outcome, by: Shares, chosen: Chosen) -> MixCase:
    what = {
        "as given": f"{chosen.name} as the file has it.",
        "balanced": f"{chosen.name} with both counts of each pair replaced by their mean.",
        "transposed": f"{chosen.name} in force, read the other way round: the column makes the contacts.",
        "transposed, then balanced": f"{chosen.name} of the file read the other way round, and balanced after that.",
        "with these factors": "Every matrix of contacts times its factor.",
    }[name]
    return MixCase(name, what, in_force, outcome.R0, by.of(outcome.right), outcome.why)


def _gaps(given: FloatArray, sizes: FloatArray | None, groups: Sequence[str]) -> Gaps | None:
    if sizes is None:
        return None
    found = reciprocity(given, sizes)
    pair = None if found.pair is None else (groups[found.pair[0]], groups[found.pair[1]])
    return Gaps(rows_of(found.gaps), found.largest, pair, found.overall)


def contact_readings(
    table: Sequence[Sequence[float]], groups: Sequence[str], sizes: Sequence[float] | None = None
) -> tuple[Reading, Reading]:
    """Return what a table of contacts says if its rows make the contacts, and what if its columns do.

    Parameters
    ----------
    table : sequence of rows of float, >= 0
        Contacts per head and time unit, in an orientation that is not known.
    groups : sequence of str
        Labels of its rows and columns.
    sizes : sequence of float, > 0, optional
        Members of each group.

    Raises
    ------
    ngm.ScenarioError
        An entry is negative or no number, or a group is empty.
    """
    try:
        found = both_readings(np.array(table, dtype=float), None if sizes is None else np.array(sizes, dtype=float))
    except ContactError as error:
        where = ", ".join(groups[k] for k in error.index)
        raise ScenarioError(Problem(where, f"{error}.")) from None
    N = None if sizes is None else np.array(sizes, dtype=float)
    first, second = (
        Reading(reading.makes, tuple(reading.contacts.tolist()), reading.mean, _gaps(reading.C, N, groups))
        for reading in found
    )
    return first, second


def _sizes(found: Numbers, chosen: Chosen) -> tuple[FloatArray | None, str]:
    """Return the members of each group without infection, and where they come from or why there are none."""
    matrix = chosen.matrix
    if matrix.population is not None:
        sizes = as_floats(population(found.template, matrix, found.point.evaluator))
        sizes = sizes if chosen.block is None else sizes[chosen.block]
        source = f"population = {matrix.population.text}"
    else:
        counted = _hosts(found, chosen)
        if isinstance(counted, str):
            return None, counted
        sizes, source = counted, "the hosts in the state without infection"
    for k in np.flatnonzero(~(sizes > 0)).tolist():
        return None, f"{chosen.groups[k]} has no members ({source})."
    return sizes, source


def _hosts(found: Numbers, chosen: Chosen) -> FloatArray | str:
    """Return the hosts by group, counted in the state without infection, or why they cannot be."""
    advice = "Give population, the size of each group."
    scenario, template, matrix = found.scenario, found.template, chosen.matrix
    every = [
        dict(zip(template.by(name), copy, strict=True))
        for name in template.infected
        for copy in scenario.copies(template.by(name))
    ]
    groups = scenario.dimensions[matrix.by].groups
    sizes = np.zeros(len(groups))
    seen = set()
    for host in host_groups(found):
        own = every[int(found.at[host.members[0]])]
        if matrix.by not in own or (matrix.within in own and own[matrix.within] != chosen.within):
            continue
        copy = tuple(own.values())
        if host.size is None or copy in seen:
            why = "hosts of one group cannot be counted" if host.size is None else "there are several kinds of hosts"
            return f"{why[0].upper()}{why[1:]}. {advice}"
        seen.add(copy)
        sizes[groups.index(own[matrix.by])] += host.size
    return sizes if seen else f"No new infections arise in groups of {matrix.by}. {advice}"


def checked_factors(scenario: Scenario, factors: Mapping[str, float]) -> dict[str, float]:
    """Return the factors on matrices of contacts; refuse an unknown matrix and a factor that is negative or no number."""
    problems = []
    for name, factor in factors.items():
        if name not in contact_matrices(scenario):
            hint = closest(name, contact_matrices(scenario))
            problems.append(Problem("factors", f"'{short(name)}' is no contact matrix of this scenario.{hint}"))
        elif not (np.isfinite(factor) and factor >= 0):
            problems.append(Problem(f"factor on {name}", f"{factor:g} is no factor. Write 0.6 for 40 % less."))
    if problems:
        raise ScenarioError(problems)
    return {name: float(factor) for name, factor in factors.items()}


def rows_of(table: FloatArray) -> Matrix:
    """Return an array as a tuple of rows."""
    return tuple(tuple(row) for row in table.tolist())
