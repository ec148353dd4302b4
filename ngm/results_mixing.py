"""What the analyses of mixing return: a contact matrix looked at, and how R0 and the case mix answer to it.

One orientation throughout: entry [i][j] of contacts is what one member of group i makes with group j, per time unit. A
case mix is the share of each group among new infections once it has settled (the right Perron vector of K, summed over
the types at infection of a group). As in `ngm.results`, what does not exist is `None` with the reason beside it.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from ngm.results import Matrix, Vector

if TYPE_CHECKING:
    import pandas

__all__ = ["Curve", "Gaps", "MixCase", "Mixing", "MixingMap", "MixingResponses", "Reading", "Scale"]

#: One straight piece of a line: (x, y) of its two ends.
Piece = tuple[tuple[float, float], tuple[float, float]]


@dataclass(frozen=True, eq=False, slots=True)
class MixCase:
    """R0 and the case mix with one matrix of contacts in place of that in force.

    Attributes
    ----------
    name : str
        "as given", "balanced", "transposed", "transposed, then balanced" or "with these factors".
    what : str
        What was put in place, in a sentence.
    in_force : bool
        Whether this is what the scenario says.
    R0 : float or None
    case_mix : tuple of float or None
        In the order of `Mixing.mix_labels`; None where there is no R0 or the mix is not unique.
    why : str or None
        Why there is no number, or no mix.
    """

    name: str
    what: str
    in_force: bool
    R0: float | None
    case_mix: Vector | None
    why: str | None = None


@dataclass(frozen=True, eq=False, slots=True)
class Gaps:
    """How far a matrix of contacts is from reciprocal, C[i][j] N[i] = C[j][i] N[j].

    Attributes
    ----------
    table : tuple of rows
        (T_ij - T_ji) / mean of both, T = C[i][j] N[i]: what i counts more than j; from -2 to 2, no unit.
    largest : float
    pair : (str, str) or None
        The groups with the largest gap, the one that counts more first.
    overall : float
        Sum of the differences over the sum of the pairs' mean counts.
    """

    table: Matrix
    largest: float
    pair: tuple[str, str] | None
    overall: float

    @property
    def is_reciprocal(self) -> bool:
        """Whether both counts of every pair agree, but for rounding."""
        return self.largest <= 1e-9


@dataclass(frozen=True, eq=False, slots=True)
class Reading:
    """What a table says if its rows, or its columns, make the contacts.

    Attributes
    ----------
    makes : str
        "rows" or "columns".
    contacts : tuple of float
        Contacts per time unit that one member of each group makes.
    mean : float or None
        Their mean over the population; None without sizes, as `gaps` is.
    """

    makes: str
    contacts: Vector
    mean: float | None
    gaps: Gaps | None


@dataclass(frozen=True, eq=False, slots=True)
class Mixing:
    """A contact matrix of a scenario, and R0 and the case mix with it: the result of `ngm.mixing`.

    Attributes
    ----------
    matrix, by : str
        Name and dimension. `within` is the group of the other dimension whose matrix this is, or None; `others` are all
        groups of that dimension.
    settings : tuple of str
        Every matrix of contacts of the scenario.
    groups : tuple of str
        Labels every table and vector of this matrix.
    table, given : tuple of rows
        The matrix in force, and as the file has it. Contacts per time unit.
    row_sums, column_sums : tuple of float
        Of the matrix in force. A row sum is what one member of the group makes in all.
    sizes : tuple of float or None
        Members of each group without infection; `sizes_from` says where they come from, or why there are none.
    reciprocal : bool
        Whether the scenario asks for the matrix to be balanced.
    gaps : Gaps or None
        Of the matrix as given; None without sizes.
    assortativity : float or None
        Q of the matrix in force. `coefficient` is r, in which every contact weighs the same; None without sizes.
    mix_labels : tuple of str
        The groups that new infections arise in, and types at infection without this dimension after them.
    cases : tuple of MixCase
        The one in force first.
    """

    title: str
    time_unit: str
    digest: str
    matrix: str
    label: str | None
    by: str
    within: str | None
    others: tuple[str, ...]
    settings: tuple[str, ...]
    groups: tuple[str, ...]
    table: Matrix
    given: Matrix
    row_sums: Vector
    column_sums: Vector
    sizes: Vector | None
    sizes_from: str
    reciprocal: bool
    gaps: Gaps | None
    assortativity: float | None
    coefficient: float | None
    mix_labels: tuple[str, ...]
    cases: tuple[MixCase, ...]
    warnings: tuple[str, ...] = ()

    @property
    def in_force(self) -> MixCase:
        """R0 and the case mix of the scenario as it is."""
        return self.cases[0]

    def case(self, name: str) -> MixCase | None:
        """Return the case of this name, or None."""
        return next((case for case in self.cases if case.name == name), None)

    def to_frame(self) -> pandas.DataFrame:
        """Return the case mix: a row a group, a column a case."""
        import pandas

        return pandas.DataFrame(
            {case.name: case.case_mix for case in self.cases if case.case_mix is not None},
            index=pandas.Index(list(self.mix_labels), name="group"),
        )

    def _repr_html_(self) -> str:
        return str(self.to_frame().to_html(escape=True))


@dataclass(frozen=True, eq=False, slots=True)
class Curve:
    """R0 and the case mix along one quantity.

    Attributes
    ----------
    name : str
        The matrix.
    kind : str
        "assortativity" or "factor".
    now : float
        Where the scenario stands.
    x, R0, case_mix : tuples of equal length
        R0 and mix are None where there is no number.
    elasticity : float or None
        (x / R0) dR0/dx at a factor of 1; None for assortativity.
    """

    name: str
    kind: str
    now: float
    x: Vector
    R0: tuple[float | None, ...]
    case_mix: tuple[Vector | None, ...]
    elasticity: float | None = None


@dataclass(frozen=True, eq=False, slots=True)
class MixingResponses:
    """How R0 and the case mix answer to one matrix of contacts, and to each setting: the result of `ngm.mixing_responses`.

    Attributes
    ----------
    assortativity : Curve or None
        Along the path of `ngm.engine.mixing.with_assortativity`; None with `no_assortativity` saying why.
    settings : tuple of Curve
        Along a factor on each matrix of contacts in turn.
    losses : tuple of (float or None)
        The share of R0 lost without each setting, in the order of `settings`. They do not add up to 1.
    entries : tuple of rows, or None
        Elasticity (C_ij / R0) dR0/dC_ij of each entry of the matrix in force; None with `no_elasticities` saying why.
    pairs : tuple of rows, or None
        The same with both directions of a pair moved together: entries [i][j] + [j][i], symmetric; the entry itself on
        the diagonal. Each pair counted once they sum to the elasticity of the setting.
    by_group : tuple of float or None
        All contacts of a group, both ways, moved together. They sum to more than the setting's: pairs have two groups.
    exact : bool
        False where the state without infection depends on the contacts: the elasticities are then differences.
    """

    title: str
    digest: str
    matrix: str
    within: str | None
    groups: tuple[str, ...]
    mix_labels: tuple[str, ...]
    R0: float | None
    assortativity: Curve | None
    no_assortativity: str | None
    settings: tuple[Curve, ...]
    losses: tuple[float | None, ...]
    entries: Matrix | None
    pairs: Matrix | None
    by_group: Vector | None
    no_elasticities: str | None
    exact: bool
    warnings: tuple[str, ...] = ()


@dataclass(frozen=True, eq=False, slots=True)
class Scale:
    """One axis of a map: what is varied, its values, and where the scenario stands (None: between them or outside)."""

    kind: str
    name: str
    title: str
    values: Vector
    now: float | None


@dataclass(frozen=True, eq=False, slots=True)
class MixingMap:
    """R0 over two quantities at once: the result of `ngm.mixing_map`.

    Attributes
    ----------
    R0 : tuple of rows
        Row: y, column: x; None where there is no R0.
    line : tuple of pieces
        Straight pieces of the line R0 = 1, between neighbours on the grid.
    missing : str or None
        Why some are None.
    """

    title: str
    digest: str
    x: Scale
    y: Scale
    R0: tuple[tuple[float | None, ...], ...]
    now: float | None
    line: tuple[Piece, ...]
    missing: str | None = None

    def to_frame(self) -> pandas.DataFrame:
        """Return the grid as a table: a row a value of y, a column a value of x."""
        import pandas

        return pandas.DataFrame(
            [list(row) for row in self.R0],
            index=pandas.Index(list(self.y.values), name=self.y.title),
            columns=list(self.x.values),
        )
