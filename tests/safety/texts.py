"""Texts that each form of output could take for a command, and a grouped model that has one in every field."""

from __future__ import annotations

import ngm
from ngm.scenario.edit import toml
from ngm.scenario.model import Scenario

__all__ = ["FIELDS", "TEXTS", "TURNS", "filled", "rotated"]

#: What they are made to do, and the text.
TEXTS: dict[str, str] = {
    "script": "<script>alert(1)</script>",
    "image": "<img src=x onerror=alert(1)> <svg onload=alert(1)>",
    "end of an attribute": '"><a href="javascript:alert(1)">x</a>',
    "entity": "&lt;b&gt; &#60;i&#62; &amp;",
    "TeX input": r"$\input{/etc/passwd}$ \write18{id} \end{document}",
    "TeX signs": r"% # & _ ^ ~ { } \\ $$ \[ \]",
    "DOT": '"]; evil [URL="http://evil.example" label="',
    "typst": '#read("/etc/passwd") #import "x": y',
    "typst marks": "= heading @ref <label> $ x $ *b* _i_ `c`",
    "Markdown link": "![x](http://evil.example/a.png) [b](javascript:alert(1))",
    "Markdown marks": "# heading | a | `` ``` ~~~ *b* __c__ > q",
    "Streamlit marks": ":red[x] :material/home: :smile: $x$ <br>",
    "spreadsheet": '=HYPERLINK("http://evil.example";"x")',
    "spreadsheet sign": "@SUM(1+1)*cmd|' /C calc'!A0",
    "SQL": "'; DROP TABLE drafts; --",
    "template": "{{ 7*7 }} ${7*7} {% x %} %s {0}",
    "directions": "\u202eabc\u202c \u2066def\u2069 \u200f",
    "controls": "\x1b[31mred\x1b]0;t\x07 \x00 \x85 \u2028 \ufeff",
}

#: Every field of a scenario that takes free text; a label of a group may not hold commas, brackets and quotes.
FIELDS = (
    *("title", "summary", "label of a compartment", "label of an infected one", "label of a parameter", "source"),
    *("unit", "label of a flow", "label of a movement", "group", "label of a matrix", "source of a matrix"),
    *("name of an intervention", "note", "question", "audience", "place", "date", "author", "reviewer", "reviewed_on"),
    *("comparison", "funding", "assumption", "limit", "change"),
)

_MODEL = """[scenario]
title = @title@
time_unit = "day"
summary = @summary@
[dimensions]
town = [@group@, "b"]
[compartments]
S = { label = @label of a compartment@, infected = false, by = ["town"] }
I = { label = @label of an infected one@, infected = true, by = ["town"] }
[parameters]
q = { value = 0.3, label = @label of a parameter@, source = @source@, range = [0.1, 0.5] }
g = { value = 0.1, unit = @unit@ }
[definitions]
N = "S + I"
[matrices.C]
by = "town"
values = [[1, 2], [2, 1]]
label = @label of a matrix@
source = @source of a matrix@
[matrices.A]
by = "town"
values = [[0, 0.01], [0.01, 0]]
[[flow]]
from = "S"
to = "I"
rate = "q*S*C(I/N)"
kind = "transmission"
label = @label of a flow@
[[flow]]
from = "I"
rate = "g*I"
kind = "transition"
[[movement]]
matrix = "A"
of = ["S", "I"]
label = @label of a movement@
[infection_free]
S = 100
[[intervention]]
name = @name of an intervention@
note = @note@
cost = 2
change = [{ parameter = "q", multiply = 0.5 }]
[report]
question = @question@
audience = @audience@
place = @place@
date = @date@
author = @author@
reviewer = @reviewer@
reviewed_on = @reviewed_on@
comparison = @comparison@
funding = @funding@
assumptions = [@assumption@]
limits = [@limit@]
changes = [@change@]
"""


def filled(texts: dict[str, str]) -> Scenario:
    """Return the model with a text in each field named; the others hold a word."""
    out = _MODEL
    for field in FIELDS:
        text = texts.get(field, f"some {field}")
        if field == "group":
            text = "".join(c for c in text if c not in ",[]'\"")
        out = out.replace(f"@{field}@", toml(text))
    return ngm.loads(out)


#: Texts that stand in one field together, each at the beginning of a line.
_TOGETHER = 3
TURNS = len(TEXTS) // _TOGETHER


def rotated(turn: int) -> Scenario:
    """Return the model with other texts in every field; over all turns every field has had every text."""
    texts = list(TEXTS.values())
    held = {}
    for k, field in enumerate(FIELDS):
        first = (turn + k) % TURNS * _TOGETHER
        held[field] = "\n".join(texts[first : first + _TOGETHER])
    return filled(held)
