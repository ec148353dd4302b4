"""Places of the models in `bases` at which the tables of wrong inputs put something wrong."""

from __future__ import annotations

Edit = tuple[str, str]
Case = tuple[str, str, list[Edit], list[str]]

BETA = 'beta = { value = 0.4, unit = "1/day" }'
INFECT = 'rate = "beta * S * I / N"'
MASKS = 'change = [{ parameter = "beta", multiply = 0.6 }]'
FREE_S = 'S = "Lambda / mu"'
NDEF = 'N = "S + E + I + R"'
LABEL_S = 'S = { label = "Susceptible", infected = false }'
RECOVERY = 'from = "I"\nto = "R"\nrate = "gamma * I"'
GRATE = 'rate = "q * sus * S * C(V(I / N))"'
GCHANGE = '{ matrix = "C", group = { town = "Tarn" }, multiply = 0.5, rows = ["old"] }'
GVALUES = "[[5, 2], [1, 3]]"
DECAY = 'from = "W"\nrate = "decay * W"'


def rate(text: str) -> list[Edit]:
    return [(INFECT, f"rate = '{text}'")]


def beta(text: str) -> list[Edit]:
    return [(BETA, f"beta = {{ {text} }}")]


def change(text: str) -> list[Edit]:
    return [(MASKS, f"change = [{text}]")]


def grouped_change(text: str) -> list[Edit]:
    return [(GCHANGE, text)]


def grouped_rate(text: str) -> list[Edit]:
    return [(GRATE, f'rate = "{text}"')]


def g_matrix(text: str) -> list[Edit]:
    return [(GVALUES, text)]


FLOW1 = 'flow 2 "Infection", rate'
