"""What is fuzzed: each reader of text, what it starts from, and what must hold of whatever it accepts."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import ngm
from ngm.expression.from_latex import from_latex
from ngm.expression.parse import MOST_CHARACTERS, parse
from ngm.expression.typeset import latex
from ngm.expression.write import write
from ngm.scenario.csvfile import MatrixFileError, table_of, values_of
from ngm.scenario.edit import set_value
from ngm.scenario.examine import examine

__all__ = ["TARGETS", "Target"]


@dataclass(frozen=True, slots=True)
class Target:
    """A reader.

    Attributes
    ----------
    about : str
        One line for the command's help.
    run : callable
        Gives the bytes to the reader and checks what it returns.
    seeds : tuple of bytes
        Inputs to start from.
    words : tuple of bytes
        Pieces that mean something to it.
    most : int
        Bytes of an input.
    """

    about: str
    run: Callable[[bytes], None]
    seeds: tuple[bytes, ...]
    words: tuple[bytes, ...]
    most: int


def _text(data: bytes) -> str:
    # Bytes that are no UTF-8 become halves of characters: those, too, can reach a reader.
    return data.decode("utf-8", errors="surrogateescape")


def _parse(data: bytes) -> None:
    text = _text(data)
    tree = parse(text, matrices=("C", "M"))
    written = write(tree)
    if len(written) <= MOST_CHARACTERS:
        assert parse(written, matrices=("C", "M")) == tree, f"written back as {written!r}"
    latex(tree)


def _latex(data: bytes) -> None:
    parse(from_latex(_text(data), ("beta", "S", "I", "N", "sigma_1")), matrices=())


def _scenario(data: bytes) -> None:
    scenario = ngm.loads(_text(data))
    if len(data) % 4:
        # an edit reads the text twice more: seldom is enough
        return
    edited = ngm.loads(set_value(scenario.text, ("scenario", "title"), "Another"))
    assert edited.title == "Another"
    assert edited.flows == scenario.flows


_AGES = ("0-4", "5+", "x")


def _matrix(data: bytes) -> None:
    text = _text(data)
    examine(text)
    examine(text, _AGES)
    refused = []
    for read in (table_of, values_of):
        try:
            read(text, _AGES)
        except MatrixFileError as error:
            refused.append(error)
    if len(refused) == 2:
        raise refused[0]


def _solve(data: bytes) -> None:
    scenario = ngm.loads(_text(data))
    solution = ngm.solve(scenario, limit=0)
    solution.to_json()
    if solution.R0 is None:
        assert solution.no_R0
        return
    assert solution.R0_bounds is not None
    low, high = solution.R0_bounds
    assert 0 <= low <= solution.R0 <= high < float("inf"), (low, solution.R0, high)
    ngm.control(scenario).to_json()


_EXPRESSIONS = (
    "beta * S * I / N",
    "-x^2 + (a - b)**-c",
    "exp(-mu*tau)*log(x)/sqrt(y)",
    "max(a, b) - min(1, 2e-3)",
    "sum(xi * I, age) + sum(N)",
    "q * S * C(M(I / N))",
    "1/(1/7 + .5e+1)",
    "λ*(Λ)",
)
_LATEX_TEXTS = (
    r"\frac{\beta S I}{N}",
    r"\beta \cdot S \left(1 - \frac{I}{N}\right)^{2}",
    r"\sigma_{1} I",
    r"\sqrt{S}\exp(-\beta)",
    r"\beta I / N",
)
_SMALL = """[scenario]
title = "a"
time_unit = "day"
[compartments]
S = { infected = false }
I = { infected = true }
[parameters]
b = { value = 0.3, range = [0.1, 1] }
g = { value = "1/7", unit = "1/week" }
[[flow]]
from = "S"
to = "I"
rate = "b*S*I"
kind = "transmission"
[[flow]]
from = "I"
rate = "g*I"
kind = "transition"
[infection_free]
S = 10
"""
_FURTHER = """[state_now]
S = 5
[report]
question = "q"
[[intervention]]
name = "m"
cost = 3
change = [{ parameter = "b", multiply = 0.5 }, { infectivity = "I", reduce = 0.1 }]
"""
_SCENARIO_WORDS = (
    *(b'"beta"', b'"S"', b'"I"', b'"age"', b'"C"', b"0", b"1", b"-1", b"0.5", b"1e299", b"true", b"[]", b"{}", b"[[]]"),
    *(b'"1/7"', b'"1/0"', b'"9^9^9^9"', b'"sum(I)"', b'"C(I/N)"', b'"lognormal"', b'"uniform"', b'"0-4"', b'"1/week"'),
    *(b"value", b"unit", b"range", b"distribution", b"by", b"season", b"sign", b"label", b"infected", b"from", b"to"),
    *(b"rate", b"kind", b"file", b"values", b"population", b"reciprocal", b"within", b"multiply", b"set", b"reduce"),
    *(b"[scenario]", b"[dimensions]", b"[compartments]", b"[parameters]", b"[definitions]", b"[[flow]]", b"[report]"),
    *(b"[[movement]]", b"[infection_free]", b"[state_now]", b"[[intervention]]", b"[next_generation]", b"[projection]"),
    *(b"[matrices.C]", b'time = "discrete"', b'units = "strict"', b'"transmission"', b'"transition"', b"format = 1"),
    *(b"susceptibility", b"infectivity", b"change", b"group", b"rows", b"columns", b"parameter", b"matrix", b"name"),
    *(b"= [[1, 2], [3, 4]]", b"= { name = ", b"mean = 1, sd = 0.1", b"2024-02-31", b"0x1f", b"inf", b"nan", b"'''"),
    *(b'"max(S, I)"', b'"S - S"', b'"(S + I)^0.5"', b'"exp(I)"', b'"-g"', b'"person/day"', b'"%"', b'"generation"'),
)
_GROUPED = """[scenario]
title = "a"
time_unit = "day"
[dimensions]
age = ["x", "y"]
[compartments]
S = { infected = false, by = ["age"] }
I = { infected = true, by = ["age"] }
[parameters]
q = { value = 0.1 }
s = { value = [1, 0.5], by = ["age"] }
[definitions]
N = "S + I"
[matrices.C]
by = "age"
values = [[1, 2], [3, 4]]
population = "N"
reciprocal = true
[matrices.A]
by = "age"
values = [[0, 1], [1, 0]]
[[flow]]
from = "S"
to = "I"
rate = "q*s*S*C(I/N)"
kind = "transmission"
[[flow]]
from = "I"
rate = "I*sum(q)"
kind = "transition"
[[movement]]
matrix = "A"
of = ["S", "I"]
[infection_free]
S = [10, 10]
[[intervention]]
name = "m"
change = [{ parameter = "s", group = { age = "x" }, set = 0.5 }, { matrix = "C", multiply = 0.4, rows = ["y"] }]
"""
_SCENARIOS = tuple(text.encode() for text in (_SMALL, _SMALL + _FURTHER, _GROUPED))
_TABLES = (
    "1,2,3\n4,5,6\n7,8,9.5\n",
    ",0-4,5+,x\n0-4,1,2,3\n5+,4,5,6\nx,7,8,9\n",
    "0-4;5+;x\n1;2;3\n4;5;6\n7;8;9\n",
    "from,to,value\n" + "".join(f"{a},{b},1\n" for a in _AGES for b in _AGES),
    '"x"\t"5+"\t0-4\r\n1\t2\t3\r\n',
    "group,value\n0-4,1\n5+,2\nx,3\n",
)

TARGETS: dict[str, Target] = {
    "parse": Target(
        "expressions, read, written back and typeset",
        _parse,
        tuple(text.encode() for text in _EXPRESSIONS),
        (
            *(b"+", b"-", b"*", b"/", b"^", b"**", b"(", b")", b",", b".", b"1e-3", b"0", b"S", b"beta", b"N", b"age"),
            *(b"exp(", b"log(", b"sqrt(", b"max(", b"min(", b"sum(", b"C(", b"M(", b"[", b"'", b"=", b"<", b"lambda"),
        ),
        400,
    ),
    "latex": Target(
        "LaTeX formulas that somebody pastes into a field",
        _latex,
        tuple(text.encode() for text in _LATEX_TEXTS),
        (
            *(
                rb"\frac{",
                rb"\beta",
                rb"\left(",
                rb"\right)",
                rb"\cdot",
                rb"\sqrt",
                rb"\sigma_1",
                rb"^{2}",
                rb"_{",
                b"}",
            ),
            *(
                b"{",
                b"$",
                rb"\,",
                rb"\mathrm{",
                rb"\text{",
                rb"\exp",
                rb"\operatorname{",
                b"&",
                rb"\\",
                b"S",
                b"I",
                b"2",
            ),
        ),
        400,
    ),
    "scenario": Target("scenario files, read, edited and read again", _scenario, _SCENARIOS, _SCENARIO_WORDS, 4000),
    "matrix": Target(
        "matrix files, with known groups and without, and values by group",
        _matrix,
        tuple(text.encode() for text in _TABLES),
        (
            *(b",", b";", b"\t", b"\n", b"\r", b'"', b'""', b"0-4", b"5+", b"x", b"from", b"to", b"value", b"1", b"0"),
            *(b"-1", b"1e300", b"nan", b"inf", b"1_0", b"0,5", b"1e-400", b"=1+1", b" ", b"sNaN", b"-0"),
        ),
        600,
    ),
    "solve": Target(
        "scenario files that load, solved and controlled without symbols", _solve, _SCENARIOS, _SCENARIO_WORDS, 2000
    ),
}
