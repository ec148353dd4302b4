"""Wrong inputs, sentence by sentence of the scenario format: each is refused, and the message says where and what.

The expected parts of each message are by hand: the place, the offending text, and what would be right.
"""

from __future__ import annotations

import pytest

import ngm
from tests.contract import wrong_models, wrong_texts, wrong_values
from tests.contract.bases import GROUPS, PLAIN, edited
from tests.contract.edits import Case, Edit

CASES: list[Case] = [
    (f"{area}: {name}", base, edits, parts)
    for area, cases in (
        ("names", wrong_texts.NAMES),
        ("labels", wrong_texts.LABELS),
        ("expressions", wrong_texts.EXPRESSIONS),
        ("scenario", wrong_texts.SCENARIO),
        ("TOML", wrong_texts.TOML),
        ("compartments", wrong_values.COMPARTMENTS),
        ("parameters", wrong_values.PARAMETERS),
        ("units", wrong_values.UNITS),
        ("definitions", wrong_values.DEFINITIONS),
        ("flows", wrong_models.FLOWS),
        ("matrices", wrong_models.MATRICES),
        ("movements", wrong_models.MOVEMENTS),
        ("infection-free state", wrong_models.FREE),
        ("interventions", wrong_models.INTERVENTIONS),
        ("derivation", wrong_models.DERIVATION),
    )
    for name, base, edits, parts in cases
]


def text_of(base: str, edits: list[Edit]) -> str:
    return edited(PLAIN if base == "P" else GROUPS, *edits)


@pytest.mark.parametrize(("base", "edits", "parts"), [case[1:] for case in CASES], ids=[case[0] for case in CASES])
def test_refused(base: str, edits: list[Edit], parts: list[str]) -> None:
    with pytest.raises(ngm.NgmError) as caught:
        ngm.solve(ngm.loads(text_of(base, edits)), limit=0)
    message = str(caught.value)
    assert len(message) < 2000
    for part in parts:
        assert part in message, message
