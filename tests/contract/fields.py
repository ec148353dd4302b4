"""What the results format says of each field, computed once more from F and V of the second route."""

from __future__ import annotations

import itertools
import math
import re
from typing import Any

import mpmath as mp
import numpy as np

from tests.contract.second_route import Route

TOP = ["title", "types", "infection_free", "F", "V", "K_large", "types_at_infection", "K", "R0", "no_R0", "R0_bounds"]
TOP += ["per_cycle", "closed_form", "symbolic", "perron", "structure", "growth_rate", "doubling_time", "conditions"]
TOP += ["warnings"]
NULL_WITHOUT_R0 = ("R0", "R0_bounds", "per_cycle", "closed_form", "K", "K_large", "perron", "structure")


def near(a: Any, b: Any, relative: float = 1e-9, least: float = 1e-13) -> bool:
    return bool(abs(a - b) <= relative * max(abs(a), abs(b)) + least)


def eigenvalues(M: Any) -> list[Any]:
    if M.rows == 0:
        return []
    return [M[0, 0]] if M.rows == 1 else list(mp.eig(M, left=False, right=False))


def radius(M: Any) -> Any:
    return max((abs(e) for e in eigenvalues(M)), default=mp.mpf(0))


def abscissa(M: Any) -> Any:
    return max(mp.re(e) for e in eigenvalues(M))


def part(M: Any, rows: list[int], columns: list[int]) -> Any:
    return (
        mp.matrix(len(rows), len(columns))
        if not rows or not columns
        else mp.matrix([[M[i, j] for j in columns] for i in rows])
    )


def determinant(M: Any) -> Any:
    rows, out = M.tolist(), mp.mpf(1)
    while rows:
        pivot = max(range(len(rows)), key=lambda i: abs(rows[i][0]))
        if rows[pivot][0] == 0:
            return mp.mpf(0)
        out *= rows[pivot][0] * (-1) ** pivot
        top = rows.pop(pivot)
        rows = [[a - row[0] / top[0] * b for a, b in zip(row[1:], top[1:], strict=True)] for row in rows]
    return out


def matrix_differs(name: str, told: Any, M: Any) -> list[str]:
    """Return where a printed matrix is another one, or has its zeros elsewhere."""
    if told is None or len(told) != M.rows:
        return [f"{name} has another shape"]
    return [
        f"{name}[{i}][{j}] {told[i][j]} {mp.nstr(M[i, j], 15)}"
        for i in range(M.rows)
        for j in range(M.cols)
        if not near(told[i][j], M[i, j]) or (told[i][j] == 0) != (abs(M[i, j]) < mp.mpf(10) ** -22)
    ]


def leads(K: Any) -> list[list[bool]]:
    """Return which type leads to which, itself included."""
    q = K.rows
    out = [[i == j or K[j, i] != 0 for j in range(q)] for i in range(q)]
    for k, i, j in itertools.product(range(q), repeat=3):
        out[i][j] |= out[i][k] and out[k][j]
    return out


def period(K: Any, members: list[int]) -> int | None:
    """Return the greatest common divisor of the lengths of the cycles, from the lengths up to 2 m of closed walks."""
    A = np.array([[K[i, j] != 0 for j in members] for i in members], dtype=float)
    lengths, walks = [], np.eye(len(members))
    for n in range(1, 2 * len(members) + 1):
        walks = (walks @ A > 0).astype(float)
        if np.trace(walks) > 0:
            lengths.append(n)
    return math.gcd(*lengths) if lengths else None


def class_growth(F: Any, V: Any, members: list[int]) -> float:
    """Return the growth rate of a class (rows of F) on the states between its types and those that infect them."""
    n = F.rows
    leads_to = leads(mp.matrix([[V[i, j] if i != j else 0 for j in range(n)] for i in range(n)]))
    infects = [j for j in range(n) if any(F[i, j] != 0 for i in members)]
    states = [s for s in range(n) if any(leads_to[i][s] for i in members) and any(leads_to[s][j] for j in infects)]
    own = [[float(F[i, j]) if i in members else 0.0 for j in states] for i in states]
    return float(max(np.linalg.eigvals(np.array(own) - np.array(part(V, states, states).tolist(), dtype=float)).real))


class Checked:
    """One result against the second route; `wrong` lists what differs."""

    def __init__(self, told: dict[str, Any], route: Route) -> None:
        self.told, self.route, self.wrong = told, route, []
        self.F, self.V = route.at(told["infection_free"])
        self.labels = [route.label(copy) for copy in route.types]
        self.says(list(told) == TOP, "keys")
        self.says(told["types"] == self.labels, "types")
        self.says(list(told["infection_free"]) == [route.label(copy) for copy in route.uninfected], "state")
        for copy in route.uninfected:
            own = told["infection_free"][route.label(copy)]
            self.says(own >= 0 and near(own, route.state[copy]), f"{route.label(copy)} = {own}")
        self.wrong += matrix_differs("F", told["F"], self.F) + matrix_differs("V", told["V"], self.V)
        self.growth()
        self.at = [self.labels.index(name) for name in told["types_at_infection"]]
        self.says(self.at == sorted(self.at), "order of types at infection")
        self.says({i for i in range(len(self.labels)) if any(self.F[i, :])} <= set(self.at), "types at infection")
        self.has_R0 = self.exists()
        if not self.has_R0:
            self.says(all(told[key] is None for key in NULL_WITHOUT_R0) and bool(told["no_R0"]), "no R0")
            return
        self.says(told["no_R0"] is None and told["R0"] is not None, f"R0: {told['no_R0']}")
        if told["R0"] is None:
            return
        self.K_large = self.F * mp.inverse(self.V)
        self.K = part(self.K_large, self.at, self.at)
        self.wrong += matrix_differs("K_large", told["K_large"], self.K_large) + matrix_differs("K", told["K"], self.K)
        for i, j in itertools.product(range(len(self.at)), repeat=2):
            self.K[i, j] = self.K[i, j] if abs(self.K[i, j]) > mp.mpf(10) ** -22 else mp.mpf(0)
        self.numbers()
        self.symbols()

    def says(self, holds: bool, what: str) -> None:
        if not holds:
            self.wrong.append(what)

    def growth(self) -> None:
        rate = abscissa(self.F - self.V)
        self.says(near(self.told["growth_rate"], rate, 1e-8, 1e-11), f"growth {self.told['growth_rate']} {rate}")
        doubling = math.log(2) / self.told["growth_rate"] if self.told["growth_rate"] > 0 else None
        own = self.told["doubling_time"]
        self.says(own == doubling or (own is not None and doubling is not None and near(own, doubling)), "doubling")
        conditions = self.told["conditions"]
        self.says([c["name"] for c in conditions] == ["A1", "A2", "A3", "A4", "A5"], "conditions")
        for c in conditions:
            self.says(bool(c["detail"]), "detail")
            self.says(
                c["holds"] or any(c["name"] in w for w in self.told["warnings"]), f"{c['name']} without a warning"
            )

    def exists(self) -> bool:
        """F not negative, V of the right signs, and its inverse not negative."""
        cells = list(itertools.product(range(self.F.rows), repeat=2))
        if any(self.F[c] < 0 for c in cells) or any(self.V[i, j] > 0 for i, j in cells if i != j):
            return False
        return all(mp.re(e) > mp.mpf(10) ** -20 for e in eigenvalues(self.V))

    def numbers(self) -> None:
        told, K, q = self.told, self.K, len(self.at)
        reach = leads(K)
        classes = sorted({tuple(j for j in range(q) if reach[i][j] and reach[j][i]) for i in range(q)})
        roots = {c: radius(part(K, list(c), list(c))) if period(K, list(c)) else mp.mpf(0) for c in classes}
        R0 = max(roots.values(), default=mp.mpf(0))
        low, high = told["R0_bounds"]
        self.says(near(told["R0"], R0), f"R0 {told['R0']} {mp.nstr(R0, 15)}")
        self.says(low <= told["R0"] <= high, "R0 outside its bounds")
        self.says(R0 > 0 or low == high == 0, "bounds of 0")
        self.says(high - low <= 1e-9 * R0, f"wide bounds {low} {high}")
        if all(self.route.label(copy).partition("[")[0] in self.route.free for copy in self.route.uninfected):
            # only where the file gives the whole state is it exact here
            slack = mp.mpf(10) ** -20 * R0
            self.says(low - slack <= R0 <= high + slack, f"bounds {low} {high} {mp.nstr(R0, 20)}")
        attaining = [c for c in classes if R0 > 0 and near(roots[c], R0, 1e-12)]
        periods = {period(K, list(c)) for c in attaining}
        cycle = mp.mpf(0) if R0 == 0 else R0 ** periods.pop() if len(periods) == 1 else None
        same = told["per_cycle"] is None if cycle is None else near(told["per_cycle"] or 0, cycle)
        self.says(same, f"per cycle {told['per_cycle']} {cycle}")
        self.structure(classes, roots, reach)
        self.perron(R0 if len(attaining) == 1 else None)

    def structure(self, classes: list[Any], roots: dict[Any, Any], reach: list[list[bool]]) -> None:
        own = self.told["structure"]
        names = self.told["types_at_infection"]
        irreducible = len(classes) == 1 and period(self.K, list(classes[0])) is not None
        self.says(own["irreducible"] == irreducible, "irreducible")
        self.says(own["period"] == (period(self.K, list(classes[0])) if irreducible else None), "period")
        found = [tuple(names.index(name) for name in c["types"]) for c in own["classes"]]
        self.says(sorted(found) == classes, f"classes {found} {classes}")
        pairs = itertools.combinations(found, 2)
        self.says(not any(reach[later[0]][earlier[0]] for earlier, later in pairs), "order of classes")
        for members, c in zip(found, own["classes"], strict=True):
            self.says(near(c["R0"], roots[members]), f"R0 of {c}")
            self.says(c["period"] == period(self.K, list(members)), f"period of {c}")
            if roots[members] == 0:
                self.says(c["growth_rate"] is None, f"growth of {c}")
            else:
                rate = class_growth(self.F, self.V, [self.at[i] for i in members])
                self.says(near(c["growth_rate"], rate, 1e-7, 1e-9), f"growth of {c} {rate}")

    def perron(self, R0: Any) -> None:
        own = self.told["perron"]
        self.says((own is None) == (R0 is None), "perron null")
        if own is None or R0 is None:
            return
        right, left = mp.matrix(own["right"]), mp.matrix(own["left"]).T
        self.says(near(sum(own["right"]), 1, 1e-12), "right does not sum to 1")
        self.says(near((left * right)[0], 1, 1e-12), "left right is not 1")
        self.says(min(own["right"] + own["left"]) >= 0, "negative vector")
        self.says(mp.norm(self.K * right - R0 * right, 1) <= 1e-9 * R0, "right vector")
        self.says(mp.norm(left * self.K - R0 * left, 1) <= 1e-9 * R0 * mp.norm(left, 1), "left vector")

    def symbols(self) -> None:
        symbolic, route = self.told["symbolic"], self.route
        taken = {*route.compartments, *route.parameters, *route.definitions, *route.matrices, *route.dims}
        known: dict[str, Any] = {}
        for name, text in symbolic["abbreviations"].items():
            self.says(name not in taken, f"abbreviation {name}")
            known[name] = route.text_value(text, known)
        for name, M in (("F", self.F), ("V", self.V), ("K", self.K)):
            if symbolic[name] is not None:
                values = [[route.text_value(text, known) for text in row] for row in symbolic[name]]
                self.wrong += [f"symbolic {line}" for line in matrix_differs(name, values, M)]
        for name, text in (symbolic["infection_free"] or {}).items():
            own = route.text_value(text, known)
            self.says(near(own, self.told["infection_free"][name]), f"symbolic {name} = {text}")
        polynomial, q = symbolic["characteristic_polynomial"], len(self.at)
        if polynomial is not None and q:
            variable = "x"
            while variable in taken:
                variable += "_"
            self.says(re.search(rf"\b{variable}\b", polynomial) is not None, f"polynomial in {variable}: {polynomial}")
            for x in (mp.mpf("1.37"), mp.mpf("-0.6"), mp.mpf(self.told["R0"])):
                own = route.text_value(polynomial, {**known, variable: x})
                scale = max(1.0, self.told["R0"]) ** q
                self.says(near(own, determinant(x * mp.eye(q) - self.K), 1e-8, 1e-9 * scale), f"polynomial at {x}")
        if self.told["closed_form"] is not None:
            own = route.text_value(self.told["closed_form"])
            self.says(near(own, self.told["R0"]), f"closed form {self.told['closed_form']} = {own}")


def control_differs(told: dict[str, Any], checked: Checked) -> list[str]:
    """Return what differs in the object of `control`."""
    wrong = (
        []
        if list(told) == ["R0", "type_reproduction", "target_reproduction", "state_reproduction", "warnings"]
        else ["keys"]
    )
    lists = (told["type_reproduction"], told["target_reproduction"], told["state_reproduction"])
    if not checked.has_R0:
        return wrong + (["lists without R0"] if any(lists) or told["R0"] is not None else [])
    names, labels, K, q = checked.told["types_at_infection"], checked.labels, checked.K, len(checked.at)
    wrong += [] if told["R0"] == checked.told["R0"] else ["another R0"]
    expected: dict[tuple[str, ...], Any] = {}

    def number(key: tuple[str, ...], targeted: Any, rest: Any, critical: Any) -> None:
        # where the rest is at 1 to the last digits, both answers are right
        if near(critical, 1, 1e-12):
            return
        expected[key] = radius(targeted * mp.inverse(rest)) if critical < 1 else None

    sizes = range(1, q + 1) if q <= 6 else (1,)
    sets = [list(s) for size in sizes for s in itertools.combinations(range(q), size)]
    for s in sets:
        rows = mp.diag([1 if i in s else 0 for i in range(q)])
        others = K - rows * K
        number(("type", *(names[i] for i in s)), rows * K, mp.eye(q) - others, radius(others))
    entries = [(i, j) for i, j in itertools.product(range(q), repeat=2) if K[i, j] != 0] if q <= 10 else []
    for i, j in entries:
        only = mp.matrix(q, q)
        only[i, j] = K[i, j]
        number(("entry", names[i], names[j]), only, mp.eye(q) - K + only, radius(K - only))
    for j, name in enumerate(labels):
        if any(checked.F[i, j] != 0 for i in range(len(labels))):
            column = mp.matrix(len(labels), len(labels))
            column[:, j] = checked.F[:, j]
            least = min(mp.re(e) for e in eigenvalues(checked.V - checked.F + column))
            number(("state", name), column, checked.V - checked.F + column, mp.mpf(1) - least)
    found = {("type", *row["types"]): row for row in lists[0]}
    found |= {("entry", *row["entry"]): row for row in lists[1]}
    found |= {("state", row["state"]): row for row in lists[2]}
    wrong += [] if len(found) == sum(map(len, lists)) else ["doubled rows"]
    wrong += [] if len(lists[0]) == len(sets) and len(lists[1]) == len(entries) else ["lists are not complete"]
    for key, T in expected.items():
        row = found.get(key)
        if row is None or (row["T"] is None) != (T is None):
            wrong.append(f"{key}: {row} {T}")
        elif T is None:
            wrong += [] if row["why"] and row["critical_effort"] is None else [f"{key}: {row}"]
        else:
            effort = 1 - 1 / T if T > 1 else 0
            right = near(row["T"], T, 1e-8) and near(row["critical_effort"], effort, 1e-8, 1e-9) and row["why"] is None
            wrong += [] if right else [f"{key}: {row} {mp.nstr(T, 12)}"]
    return wrong
