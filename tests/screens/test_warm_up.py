"""What the app imports ahead of time is there."""

import ast
import importlib.util
from pathlib import Path

APP = Path(__file__).resolve().parents[2] / "app.py"


def test_every_name_can_be_imported():
    assigned = [n for n in ast.parse(APP.read_text(encoding="utf-8")).body if isinstance(n, ast.Assign)]
    (names,) = [ast.literal_eval(n.value) for n in assigned if getattr(n.targets[0], "id", "") == "HEAVY"]
    assert "ngm" in names
    assert [name for name in names if importlib.util.find_spec(name) is None] == []
