"""One wrong file for each message: what is told, and that one mistake is told once.

The expected wordings are by hand, from the rules of the scenario format.
"""

from __future__ import annotations

import pytest

from ngm.errors import ScenarioError
from ngm.scenario.file import loads
from tests.scenario.models import GROUPED, PLAIN, changed

BETA = 'beta = { value = 0.4, unit = "1/day", range = [0.2, 0.6] }'
GAMMA = 'gamma = { value = 0.2, unit = "1/day", distribution = { name = "lognormal", mean = 0.2, sd = 0.04 } }'
MASKS = 'change = [{ parameter = "beta", multiply = 0.6 }]'
SUS = 'sus = { value = [1.0, 0.5], by = ["age"] }'


def dist(text: str) -> str:
    return f"gamma = {{ value = 0.2, distribution = {text} }}"


# (what stands in PLAIN, what is put there, parts of the message)
ON_PLAIN: list[tuple[str, str, tuple[str, ...]]] = [
    # [scenario]
    ('title = "Plain"', "", ("scenario: title is missing",)),
    ('title = "Plain"', 'title = ""', ("scenario, title: is empty",)),
    ('title = "Plain"', "title = 3", ("scenario, title: expected a text in quotes, not the number 3",)),
    ('time_unit = "day"', "", ("scenario: time_unit is missing",)),
    ('time_unit = "day"', 'time_unit = "1/day"', ("scenario, time_unit: '1/day' is not one unit of time",)),
    ('time_unit = "day"', 'time_unit = "day"\ncolour = "red"', ("scenario: 'colour' is not a key that is known here",)),
    ('time_unit = "day"', 'time_unit = "day"\nsumary = "x"', ("Did you mean 'summary'?",)),
    ('time_unit = "day"', 'time_unit = "day"\nformat = 2', ("scenario, format: 2 is not known", "format = 1")),
    ('time_unit = "day"', 'time_unit = "day"\nformat = "1"', ("scenario, format: expected the number 1",)),
    ('time_unit = "day"', 'time_unit = "day"\nformat = true', ("scenario, format: expected the number 1, not true",)),
    ('time_unit = "day"', 'time_unit = "day"\nunits = "loose"', ("scenario, units: 'loose' is not known",)),
    ('time_unit = "day"', 'time_unit = "day"\ntime = "discreet"', ("scenario, time", "Did you mean 'discrete'?")),
    ('time_unit = "day"', 'time_unit = "day"\ntime = "continuous"', ("scenario, time: 'continuous' is not known",)),
    # sections
    ("[definitions]", "[definitons]", ("definitons: is not a section", "Did you mean 'definitions'?")),
    ("[infection_free]", "[state_now]\nI = 1\n[infection_free]", ("state_now.I: I is infected",)),
    ("[infection_free]", "[state_now]\nS = -1\n[infection_free]", ("state_now.S: -1 is negative",)),
    ("[infection_free]", "[state_now]\nX = 1\n[infection_free]", ("state_now",)),
    ("[[intervention]]", "[intervention]", ("[intervention]: expected a list of tables", "[[intervention]]")),
    # names
    ("[definitions]", '[definitions]\n"2x" = "1"', ("definitions.2x: '2x' is not a name",)),
    ("[definitions]", '[definitions]\na-b = "1"', ("'a-b' is not a name",)),
    ("[definitions]", '[definitions]\n"naïve" = "1"', ("'naïve' is not a name",)),
    ("[definitions]", '[definitions]\nexp = "1"', ("definitions.exp: 'exp' is the name of a function",)),
    ("[definitions]", '[definitions]\nbeta = "1"', ("definitions.beta: 'beta' is already a parameter",)),
    ("[definitions]", '[definitions]\n"β" = "1"', ("'beta' is already a parameter", "the same name as 'β'")),
    ("[definitions]", '[definitions]\nS = "1"', ("'S' is already a compartment",)),
    ("[compartments]", '[dimensions]\nS = ["a"]\n[compartments]', ("'S' is already a dimension",)),
    # compartments
    ("E = { infected = true }", "E = { }", ("compartments.E: infected is missing",)),
    ("E = { infected = true }", 'E = { infected = "yes" }', ("compartments.E, infected: expected true or false",)),
    ("E = { infected = true }", "E = { infected = 1 }", ("compartments.E, infected", "not the number 1")),
    ("E = { infected = true }", "E = true", ("compartments.E: expected a table, not true",)),
    ("E = { infected = true }", "E = { infected = true, lable = 'x' }", ("Did you mean 'label'?",)),
    ("E = { infected = true }", "E = { infected = true, label = 1 }", ("compartments.E, label: expected a text",)),
    ("E = { infected = true }", "E = { infected = true, unit = 1 }", ("compartments.E, unit: expected a text",)),
    ("E = { infected = true }", 'E = { infected = true, by = "age" }', ('Write by = ["age"]',)),
    ("E = { infected = true }", 'E = { infected = true, by = ["age"] }', ("'age' is not a dimension", "no dimensions")),
    # parameters
    (BETA, "beta = 0.4", ("parameters.beta: expected a table", "beta = { value = 0.4 }")),
    (BETA, "beta = { unit = '1/day' }", ("parameters.beta: value is missing",)),
    (
        BETA,
        "beta = { value = true }",
        ("parameters.beta, value: expected a number or an expression in quotes, not true",),
    ),
    (BETA, "beta = { value = [1, 2] }", ("parameters.beta, value: is a list, but there are no groups",)),
    (BETA, "beta = { value = {} }", ("parameters.beta, value", "not a table")),
    (BETA, "beta = { value = -0.4 }", ("parameters.beta, value: -0.4 is negative", 'sign = "any"')),
    (BETA, 'beta = { value = "-2/5" }', ("parameters.beta, value: -2/5 is negative",)),
    (BETA, 'beta = { value = "1/0" }', ("parameters.beta, value: this divides by 0",)),
    (BETA, 'beta = { value = "log(-1)" }', ("only a positive number has a logarithm",)),
    (BETA, 'beta = { value = "log(0)" }', ("only a positive number has a logarithm",)),
    (BETA, 'beta = { value = "sqrt(-2)" }', ("a negative number has no square root",)),
    (BETA, 'beta = { value = "(-8)^(1/3)" }', ("a negative number has no such power",)),
    (BETA, 'beta = { value = "9^9^9^9" }', ("parameters.beta, value: the result is too large",)),
    (BETA, 'beta = { value = "exp(1000)" }', ("the result is too large",)),
    (BETA, "beta = { value = 1e300 }", ("is too large", "1e300")),
    (BETA, "beta = { value = nan }", ("parameters.beta, value: NaN is no number",)),
    (BETA, "beta = { value = inf }", ("parameters.beta, value: Infinity is no number",)),
    (BETA, "beta = { value = 2024-01-01 }", ("parameters.beta, value", "the date 2024-01-01")),
    (BETA, 'beta = { value = "0.4 +" }', ("parameters.beta, value: expected a number",)),
    (BETA, 'beta = { value = "" }', ("parameters.beta, value: the expression is empty",)),
    (BETA, 'beta = { value = "sgma" }', ("'sgma' is not defined. Did you mean 'sigma'?",)),
    (BETA, 'beta = { value = "2 * N" }', ("'N' is a definition. A parameter may follow other parameters only",)),
    (BETA, 'beta = { value = "2 * I" }', ("'I' is a compartment. A parameter may follow other parameters only",)),
    (BETA, 'beta = { value = "sum(sigma)" }', ("sum cannot stand in a parameter",)),
    (BETA, 'beta = { value = "beta + 1" }', ("parameters: beta -> beta goes in a circle",)),
    (BETA, 'beta = { value = "kappa" }\nkappa = { value = "beta" }', ("parameters: beta -> kappa -> beta goes in a",)),
    (BETA, 'beta = { value = "sigma - 1" }', ("is -0.8 at sigma = 0.2", "negative")),
    (BETA, 'beta = { value = "1/(sigma - 0.2)" }', ("parameters.beta, value: this divides by 0",)),
    (
        BETA,
        'beta = { value = "2*sigma", range = [0, 1] }',
        ("beta, range: a parameter that follows others takes none",),
    ),
    (BETA, 'beta = { value = "2*sigma", unit = "1/week" }', ("parameters.beta, unit: '1/week' holds 'week'",)),
    (BETA, 'beta = { value = "2*sigma", unit = "%" }', ("parameters.beta, unit: '%' holds '%'",)),
    (BETA, "beta = { value = 0.4, unit = 1 }", ("parameters.beta, unit: expected a text",)),
    (BETA, "beta = { value = 0.4, range = [0.6, 0.2] }", ("range: low 0.6 is above high 0.2", "Write [0.2, 0.6]")),
    (BETA, "beta = { value = 0.4, range = [-1, 1] }", ("parameters.beta, range: -1 is negative",)),
    (BETA, "beta = { value = 0.4, range = [1] }", ("parameters.beta, range: expected two numbers, [low, high]",)),
    (BETA, "beta = { value = 0.4, range = 1 }", ("parameters.beta, range: expected two numbers",)),
    (BETA, 'beta = { value = 0.4, range = ["a", 1] }', ("parameters.beta, range: expected a number",)),
    (BETA, 'beta = { value = 0.4, sign = "plus" }', ("parameters.beta, sign: 'plus' is not known",)),
    (BETA, "beta = { value = 0.4, sign = true }", ("parameters.beta, sign: expected a text",)),
    (BETA, "beta = { value = 0.4, season = { amplitude = 0.3 } }", ("parameters.beta, season, period: is missing",)),
    (BETA, "beta = { value = 0.4, vlaue = 1 }", ("parameters.beta: 'vlaue' is not a key", "Did you mean 'value'?")),
    (BETA, "beta = { value = 0.4, label = 1 }", ("parameters.beta, label: expected a text",)),
    # distributions
    (GAMMA, dist('"normal"'), ("parameters.gamma, distribution: expected a table",)),
    (GAMMA, dist("{ mean = 1, sd = 1 }"), ("name is missing", "uniform, triangular, normal")),
    (GAMMA, dist('{ name = "gama", mean = 1, sd = 1 }'), ("'gama' is not a distribution", "Did you mean 'gamma'?")),
    (GAMMA, dist('{ name = "gamma", mean = 1 }'), ("sd is missing. Write gamma with mean, sd.",)),
    (GAMMA, dist('{ name = "gamma", mean = 1, sd = 1, low = 0 }'), ("'low' is not a key of gamma",)),
    (GAMMA, dist('{ name = "gamma", mean = 0, sd = 1 }'), ("mean = 0 is not positive",)),
    (GAMMA, dist('{ name = "gamma", mean = 1, sd = 0 }'), ("sd = 0 is not positive",)),
    (GAMMA, dist('{ name = "gamma", mean = "a", sd = 1 }'), ("gamma, distribution, mean: expected a number",)),
    (GAMMA, dist('{ name = "lognormal", mean = -1, sd = 1 }'), ("mean = -1 is not positive",)),
    (GAMMA, dist('{ name = "normal", mean = -1, sd = 1 }'), ("mean = -1 is negative",)),
    (GAMMA, dist('{ name = "normal", mean = 1, sd = -1 }'), ("sd = -1 is not positive",)),
    (GAMMA, dist('{ name = "uniform", low = 1, high = 1 }'), ("low = 1 is not below high = 1",)),
    (GAMMA, dist('{ name = "uniform", low = -1, high = 1 }'), ("low = -1 is negative",)),
    (GAMMA, dist('{ name = "triangular", low = 0, mode = 2, high = 1 }'), ("mode = 2 lies outside",)),
    (GAMMA, dist('{ name = "beta", mean = 1.2, sd = 0.1 }'), ("mean = 1.2 is not below 1",)),
    (GAMMA, dist('{ name = "beta", mean = 0.5, sd = 0.5 }'), ("sd = 0.5 is too large", "below 0.5")),
    (GAMMA, dist('[{ name = "beta", mean = 0.5, sd = 0.1 }]'), ("distribution: is a list, but there are no groups",)),
    # definitions
    ('N = "S + E + I + R"', "N = 1000", ("definitions.N: expected an expression in quotes, not the number 1000",)),
    ('N = "S + E + I + R"', 'N = "S + foi"', ("definitions: N -> foi -> N goes in a circle",)),
    ('N = "S + E + I + R"', 'N = "S + E + I + R + 1/0"', ("definitions.N: this divides by 0",)),
    ('N = "S + E + I + R"', 'N = "S +"', ("definitions.N: expected a number",)),
    ('N = "S + E + I + R"', 'N = "S + E + I + Q"', ("definitions.N: 'Q' is not defined",)),
    ('N = "S + E + I + R"', 'N = "sum(S)"', ("sum adds over groups, and this file has no [dimensions]",)),
    # flows
    ("foi * S", "foii * S", ("flow 1 \"Infection\", rate: 'foii' is not defined. Did you mean 'foi'?",)),
    ("foi * S", "foi * (S", ("flow 1 \"Infection\", rate: this '(' is not closed",)),
    ("foi * S", "__import__('os')", ("flow 1",)),
    ("foi * S", "foi(S)", ("flow 1",)),
    ("foi * S", "(1e200*1e200)*foi*S", ("too large",)),
    ('rate = "sigma * E"', "rate = 5", ("flow 2, rate: expected a text in quotes, not the number 5",)),
    ('rate = "sigma * E"', "", ("flow 2: rate is missing",)),
    ('from = "E"\nto = "I"\n', "", ("flow 2: has neither from nor to",)),
    ('from = "E"\nto = "I"\n', 'from = "E"\nto = "E"\n', ("flow 2: goes from E to E",)),
    ('from = "E"\nto = "I"\n', 'from = "E"\nto = "J"\n', ("flow 2, to: 'J' is not a compartment",)),
    ('from = "E"\nto = "I"\n', 'from = "E"\nto = ""\n', ("flow 2, to: '' is not a compartment",)),
    ('from = "E"\nto = "I"\n', 'from = "E"\nto = 1\n', ("flow 2, to: expected the name of a compartment",)),
    ('from = "E"\nto = "I"\n', 'from = "E"\nto = "beta"\n', ("flow 2, to: 'beta' is a parameter, not a compartment",)),
    ('from = "E"\nto = "I"\n', 'from = "E"\ninto = "I"\n', ("flow 2: 'into' is not a key",)),
    ('kind = "transmission"', 'kind = "transition"', ("flows: none is a transmission",)),
    ('kind = "transmission"', 'kind = "infection"', ("flow 1 \"Infection\", kind: 'infection' is not known",)),
    ('kind = "transmission"', 'kind = "transmision"', ("Did you mean 'transmission'?",)),
    ('kind = "transmission"', "", ('flow 1 "Infection": kind is missing',)),
    ('to = "E"', 'to = "R"', ("this transmission ends in R, which is not infected",)),
    ('to = "E"', "", ("this transmission leaves the system",)),
    ('label = "Infection"', "label = 1", ("flow 1, label: expected a text",)),
    # the infection-free state
    ("S = 1000", "E = 0\nS = 1000", ("infection_free.E: E is infected and so 0",)),
    ("S = 1000", "SS = 0\nS = 1000", ("infection_free.SS: 'SS' is not a compartment",)),
    ("S = 1000", "S = -1", ("infection_free.S: -1 is negative",)),
    ("S = 1000", "S = [1, 2]", ("infection_free.S: is a list, but there are no groups",)),
    ("S = 1000", "S = true", ("infection_free.S: expected a number or an expression",)),
    ("S = 1000", 'S = "N - R"', ("infection_free: S -> N -> S goes in a circle",)),
    ("S = 1000", 'S = "1000 - E"', ("infection_free.S: 'E' is infected",)),
    ("S = 1000\nR = 0", 'S = "R"\nR = "S"', ("infection_free: S -> R -> S goes in a circle",)),
    # interventions
    ('name = "Masks"', "", ("intervention 1: name is missing",)),
    ('name = "Masks"', 'name = " "', ("intervention 1, name: is empty",)),
    ('name = "Masks"', 'name = "Masks"\ncost = "3"', ("cost: expected a number, not the text '3'",)),
    ('name = "Masks"', 'name = "Masks"\ncost = true', ("cost: expected a number, not true",)),
    ('name = "Masks"', 'name = "Masks"\nprice = 3', ("'price' is not a key",)),
    (
        "[[intervention]]",
        '[[intervention]]\nname = "Masks"\n' + MASKS + "\n[[intervention]]",
        ("has this name already",),
    ),
    (MASKS, "", ('intervention "Masks": change is missing',)),
    (MASKS, "change = []", ("lists no change",)),
    (MASKS, "change = 3", ("change: expected a list of tables",)),
    (MASKS, "change = [3]", ("change: expected a list of tables",)),
    (MASKS, "change = [{ multiply = 3 }]", ("change 1: names nothing to change",)),
    (MASKS, 'change = [{ paramter = "beta", multiply = 3 }]', ("Did you mean 'parameter'?",)),
    (MASKS, 'change = [{ parameter = "beta", matrix = "C", set = 3 }]', ("names parameter and matrix",)),
    (MASKS, 'change = [{ parameter = "bata", set = 3 }]', ("'bata' is not a parameter", "Did you mean 'beta'?")),
    (MASKS, 'change = [{ parameter = "N", set = 3 }]', ("'N' is a definition, not a parameter",)),
    (MASKS, 'change = [{ matrix = "C", set = 3 }]', ("'C' is not a matrix", "no matrices")),
    (MASKS, 'change = [{ parameter = "beta" }]', ("does not say by how much",)),
    (MASKS, 'change = [{ parameter = "beta", set = 1, add = 1 }]', ("has set and add",)),
    (MASKS, 'change = [{ parameter = "beta", reduce = 0.5 }]', ("a parameter takes no reduce",)),
    (MASKS, 'change = [{ parameter = "beta", multiply = -1 }]', ("multiply = -1 is negative",)),
    (MASKS, 'change = [{ parameter = "beta", set = -1 }]', ("set = -1 is negative",)),
    (MASKS, 'change = [{ parameter = "beta", set = "sigma" }]', ("expected a number",)),
    (MASKS, 'change = [{ parameter = "beta", set = 1, group = { age = "a" } }]', ("beta is not grouped",)),
    (MASKS, 'change = [{ parameter = "beta", set = 1, rows = ["a"] }]', ("'rows' is not a key",)),
    (MASKS, 'change = [{ susceptibility = "E", multiply = 0.5 }]', ("a susceptibility takes no multiply",)),
    (MASKS, 'change = [{ susceptibility = "E", reduce = 30 }]', ("reduce = 30 lies outside [0, 1]", "write 0.30")),
    (MASKS, 'change = [{ susceptibility = "E", reduce = -0.1 }]', ("reduce = -0.1 lies outside [0, 1]",)),
    (MASKS, 'change = [{ susceptibility = "I", reduce = 0.1 }]', ("no transmission arrives in I",)),
    (MASKS, 'change = [{ susceptibility = "S", reduce = 0.1 }]', ("S is not infected",)),
    (MASKS, 'change = [{ susceptibility = "beta", reduce = 0.1 }]', ("'beta' is a parameter, not a compartment",)),
    (MASKS, 'change = [{ infectivity = "R", reduce = 0.1 }]', ("R is not infected",)),
    # [report]
    ("[infection_free]", "[report]\nauthor = 1\n[infection_free]", ("report, author: expected a text",)),
    ("[infection_free]", "[report]\ndate = 2024-01-01\n[infection_free]", ("report, date: expected a text", "quotes")),
    ("[infection_free]", '[report]\nlimits = "x"\n[infection_free]', ('Write limits = ["x"]',)),
    ("[infection_free]", "[report]\nlimits = [1]\n[infection_free]", ("report, limits: entry 1: expected a text",)),
    ("[infection_free]", '[report]\nautor = "x"\n[infection_free]', ("Did you mean 'author'?",)),
]

ON_GROUPED: list[tuple[str, str, tuple[str, ...]]] = [
    # dimensions
    ('age = ["young", "old"]', "age = []", ("dimensions.age: has no groups",)),
    ('age = ["young", "old"]', 'age = "young"', ("dimensions.age: expected a list of groups",)),
    ('age = ["young", "old"]', 'age = ["young", 2]', ("dimensions.age: expected the label of a group in quotes",)),
    ('age = ["young", "old"]', 'age = ["young", "young"]', ("dimensions.age: 'young' stands twice",)),
    ('age = ["young", "old"]', 'age = ["young", "a,b"]', ("dimensions.age: 'a,b' holds a comma",)),
    ('age = ["young", "old"]', 'age = ["young", "a[b"]', ("'a[b' holds a comma, a square bracket or a quote",)),
    ('age = ["young", "old"]', 'age = ["young", \'a"b\']', ("holds a comma, a square bracket or a quote",)),
    ('age = ["young", "old"]', 'age = ["young", ""]', ("dimensions.age: a group has an empty label",)),
    ('age = ["young", "old"]', 'age = ["young", "old"]\nsum = ["a"]', ("'sum' is the name of a function",)),
    # by
    (
        "W = { infected = true }",
        'W = { infected = true, by = ["agee"] }',
        ("'agee' is not a dim", "Did you mean 'age'?"),
    ),
    ("W = { infected = true }", 'W = { infected = true, by = ["age", "age"] }', ("'age' stands twice",)),
    ("W = { infected = true }", "W = { infected = true, by = [1] }", ("expected the name of a dimension",)),
    ("W = { infected = true }", 'W = { infected = true, by = ["S"] }', ("'S' is a compartment, not a dimension",)),
    # values in groups
    (SUS, 'sus = { value = [1, 2, 3], by = ["age"] }', ("sus, value: 3 values for the 2 groups of age (young, old)",)),
    (SUS, 'sus = { value = [1, -2], by = ["age"] }', ("parameters.sus, value, old: -2 is negative",)),
    (SUS, 'sus = { value = [1, [2]], by = ["age"] }', ("parameters.sus, value, old", "not a list")),
    (SUS, 'sus = { value = [1, "both"], by = ["age"] }', ("varies over region, but sus does not",)),
    (SUS, 'sus = { value = "C(q)", by = ["age"] }', ("the matrix C cannot stand in a parameter",)),
    ("[[1, 2, 3], [4, 5, 6]]", "[[1, 2], [3, 4], [5, 6]]", ("3 values for the 2 groups of age",)),
    ("[[1, 2, 3], [4, 5, 6]]", "[[1, 2, 3], [4, 5]]", ("2 values for the 3 groups of region",)),
    ("[[1, 2, 3], [4, 5, 6]]", "[1, 2, 3, 4, 5, 6]", ("6 values for the 2 groups of age",)),
    ("[[1, 2, 3], [4, 5, 6]]", "[1, 2]", ("expected nested lists", "each group of region")),
    (SUS, SUS[:-2] + ', distribution = [{ name = "normal", mean = 1, sd = 0.1 }] }', ("1 value for the 2 groups",)),
    # expressions over groups
    ("gamma * I", "gamma * I * gama", ("'gama' is not defined. Did you mean 'gamma'?",)),
    ("gamma * I", "gamma * I * age", ("'age' is a dimension, which has no value",)),
    ("gamma * I", "gamma * I * C", ("'C' is a matrix. Apply it", "C(x)")),
    ("gamma * I", "sum(I, place)", ("'place' in sum(…, place) is not a dimension",)),
    ("gamma * I", "I * sum(q, age)", ("what is added up is the same in every group",)),
    ("gamma * I", "I * sum(sus, region)", ("what is added up varies over age only",)),
    ("gamma * I", "I * sum(sum(I, age), age)", ("what is added up varies over region only",)),
    ("gamma * I", "gamma(I)", ("flow 3",)),
    ("decay * W", "decay * W * sus", ("varies over age because of sus, but W has no groups of age", "sum(sus, age)")),
    ("decay * W", "decay * W * total * N", ("because of N",)),
    ("decay * W", "decay * W * C(1)", ("varies over age because of C(…)",)),
    ("sum(xi * I)", "sum(xi * I, age)", ("varies over region",)),
    ("sum(xi * I)", "xi * I", ("over age because of I", "over region because of I")),
    # matrices
    ('[matrices.C]\nby = "age"', "[matrices.C]", ("matrices.C: by is missing",)),
    (
        '[matrices.C]\nby = "age"',
        '[matrices.C]\nby = ["age"]',
        ("matrices.C, by: expected one dimension", 'by = "age"'),
    ),
    ('[matrices.C]\nby = "age"', '[matrices.C]\nby = "agee"', ("Did you mean 'age'?",)),
    ("values = [[1, 2], [3, 4]]\n", "", ("matrices.C: has neither values nor file",)),
    ("values = [[1, 2], [3, 4]]\n", 'values = [[1, 2], [3, 4]]\nfile = "c.csv"\n', ("both values and file",)),
    ("values = [[1, 2], [3, 4]]\n", 'file = "c.csv"\n', ("not in a folder",)),
    ("values = [[1, 2], [3, 4]]\n", "file = 3\n", ("expected the name of a CSV file",)),
    (
        "values = [[1, 2], [3, 4]]\n",
        "values = [[1, 2]]\n",
        (
            "expected 2 rows of 2 numbers",
            "not 1 row",
        ),
    ),
    ("values = [[1, 2], [3, 4]]\n", "values = [[1, 2], [3]]\n", ("row 2 (old) has 1 of 2 entries",)),
    ("values = [[1, 2], [3, 4]]\n", "values = [[1, 2], [3, -4]]\n", ("row 2, column 2: -4 is negative",)),
    ("values = [[1, 2], [3, 4]]\n", 'values = [[1, 2], [3, "x"]]\n', ("row 2, column 2: expected a number",)),
    (
        "values = [[1, 2], [3, 4]]\n",
        "values = [[1, 2], [3, true]]\n",
        ("row 2, column 2: expected a number, not true",),
    ),
    ("values = [[1, 2], [3, 4]]\n", "values = [[1, 2], [3, nan]]\n", ("row 2, column 2: NaN is no number",)),
    ("values = [[1, 2], [3, 4]]\n", "values = [1, 2]\n", ("as a list of lists",)),
    ("values = [[1, 2], [3, 4]]\n", "values = [[[1, 2], [3, 4]]]\n", ("this is a list of matrices",)),
    (
        'population = "sum(N, region)"',
        'population = "N"',
        ("varies over region because of N, but the matrix C has no",),
    ),
    ('population = "sum(N, region)"', "population = 5", ("population: expected an expression in quotes",)),
    ('population = "sum(N, region)"', "reciprocal = true", ("reciprocal: needs the size of each group",)),
    ('population = "sum(N, region)"', 'population = "C(1)"\nreciprocal = true', ("matrices: C -> C goes in a circle",)),
    ('population = "sum(N, region)"', 'populaton = "N"', ("Did you mean 'population'?",)),
    ('population = "sum(N, region)"', 'within = "age"', ("within: 'age' is the dimension of its rows",)),
    (
        'population = "sum(N, region)"',
        'within = "region"',
        (
            "expected a list of 3 matrices",
            "not a list of 2",
        ),
    ),
    ('within = "region"', 'within = "regon"', ("Did you mean 'region'?",)),
    ('within = "region"', "", ("expected 2 rows of 2 numbers", "list of matrices")),
    # movements
    ('matrix = "T"\n', "", ("movement 1: matrix is missing",)),
    ('matrix = "T"\n', 'matrix = "X"\n', ("movement 1, matrix: 'X' is not a matrix",)),
    ('matrix = "T"\n', 'matrix = "C"\n', ("row and column young: 1 moves a group into itself",)),
    ('of = ["S", "I"]', "", ("movement 1: of is missing",)),
    ('of = ["S", "I"]', "of = []", ("movement 1, of: is empty",)),
    ('of = ["S", "I"]', 'of = "S"', ('Write of = ["S"]',)),
    ('of = ["S", "I"]', 'of = ["S", "S"]', ("movement 1, of: 'S' stands twice",)),
    ('of = ["S", "I"]', 'of = ["S", "Z"]', ("movement 1, of: 'Z' is not a compartment",)),
    ('of = ["S", "I"]', 'of = ["W"]', ("movement 1, of: W has no groups of region",)),
    ('of = ["S", "I"]', 'of = ["S"]\nrate = 1', ("movement 1: 'rate' is not a key",)),
    # the infection-free state
    ("[[100, 200, 300], [400, 500, 600]]", "[1, 2]", ("expected nested lists",)),
    ("[[100, 200, 300], [400, 500, 600]]", "[[1, 2, 3], [4, 5, -6]]", ("infection_free.S, entry 6: -6 is negative",)),
    ("[[100, 200, 300], [400, 500, 600]]", '"sum(both, place)"', ("'place' in sum(…, place)",)),
    # interventions
    ('group = { age = "old" }', 'group = { age = "oldd" }', ("'oldd' is not a group of age", "Did you mean 'old'?")),
    ('group = { age = "old" }', 'group = { region = "North" }', ("'region' is not a dimension of sus",)),
    ('group = { age = "old" }', 'group = "old"', ("expected a table such as group = { age",)),
    ('group = { age = "old" }', "group = { age = [] }", ("names no group",)),
    ('group = { age = "old" }', "group = { }", ("names no group",)),
    ('group = { age = "old" }', "group = { age = 3 }", ("expected a group of age in quotes",)),
    ('group = { age = "old" }', 'group = { age = ["old", "old"] }', ("'old' stands twice",)),
    ('rows = ["old"]', 'rows = ["odl"]', ("rows: 'odl' is not a group of age",)),
    ('rows = ["old"]', 'rows = "old"', ('Write rows = ["old"]',)),
    ('rows = ["old"]', 'rows = ["old"], group = { region = "North" }', ("C is the same everywhere: it has no within",)),
    ("multiply = 0.4, rows", "multiply = -0.4, rows", ("multiply = -0.4 is negative",)),
    ("multiply = 0.4, rows", "reduce = 0.4, rows", ("a matrix takes no reduce",)),
    ('group = { region = "North" }', 'group = { age = "old" }', ("'age' is not a dimension of M",)),
    ('group = { region = "North" }', 'group = { region = "East" }', ("'East' is not a group of region",)),
    ('infectivity = "I", reduce', 'infectivity = "I", group = { age = "oldd" }, reduce', ("Did you mean 'old'?",)),
]


@pytest.mark.parametrize(("old", "new", "parts"), ON_PLAIN)
def test_plain(old: str, new: str, parts: tuple[str, ...]) -> None:
    check(changed(PLAIN, old, new), parts)


@pytest.mark.parametrize(("old", "new", "parts"), ON_GROUPED)
def test_grouped(old: str, new: str, parts: tuple[str, ...]) -> None:
    check(changed(GROUPED, old, new), parts)


def check(text: str, parts: tuple[str, ...]) -> None:
    with pytest.raises(ScenarioError) as caught:
        loads(text)
    message = str(caught.value)
    for part in parts:
        assert part in message
    assert len(message) < 2000
    assert "Traceback" not in message
    distinct = {problem.where for problem in caught.value.problems}
    assert len(distinct) <= 1 or "xi * I" in text or "definitons" in text, message


def test_all_problems_come_at_once() -> None:
    text = changed(changed(changed(PLAIN, "0.4", "-0.4"), "foi * S", "foii * S"), "S = 1000", "S = -1")
    with pytest.raises(ScenarioError) as caught:
        loads(text)
    assert [problem.key for problem in caught.value.problems] == [
        ("parameters", "beta", "value"),
        ("flow", 0, "rate"),
        ("infection_free", "S"),
    ]
    assert str(caught.value).count("\n    ") == 2  # one excerpt with its caret


def test_the_models_themselves_load() -> None:
    assert loads(PLAIN).title == "Plain"
    assert loads(GROUPED).title == "Grouped"


def test_an_empty_text_names_what_is_missing() -> None:
    with pytest.raises(ScenarioError) as caught:
        loads("")
    assert [problem.where for problem in caught.value.problems] == ["[scenario]", "[compartments]", "[[flow]]"]


def test_no_compartment_is_infected() -> None:
    text = PLAIN.replace("infected = true", "infected = false")
    with pytest.raises(ScenarioError, match="compartments: none is infected"):
        loads(text)


def test_infectivity_of_what_infects_nobody() -> None:
    text = changed(PLAIN, 'N = "S + E + I + R"', 'N = "1000"')
    text = changed(text, 'parameter = "beta", multiply = 0.6', 'infectivity = "E", reduce = 0.5')
    with pytest.raises(ScenarioError, match="no transmission depends on E"):
        loads(text)
