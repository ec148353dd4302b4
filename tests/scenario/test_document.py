"""What is refused before a scenario is looked at: files, encodings, TOML, and limits on size."""

from __future__ import annotations

import resource
from decimal import Decimal
from pathlib import Path

import pytest

from ngm.errors import ScenarioError
from ngm.scenario.document import to_data
from ngm.scenario.file import load, loads
from tests.scenario.models import PLAIN


@pytest.mark.parametrize(
    ("text", "parts"),
    [
        ("a = 1\na = 2\n", ("this key stands twice",)),
        ("x = { a = 1, a = 2 }", ("line 1: this key stands twice",)),
        ("[a]\n[b]\n[a]\n", ("line 3: this table stands twice",)),
        ("β = 1", ('line 1: a key with letters other than A to Z wants quotes: "β" = …', "\n    ^")),
        ("a = ", ("line 1: not valid TOML: invalid value",)),
        ("a = 1 2", ("line 1: not valid TOML",)),
        ("a = 'x", ("line 1: not valid TOML",)),
        ("[a", ("line 1: not valid TOML",)),
        ("a = " + "[" * 5000 + "]" * 5000, ("nested too deeply",)),
        ("a = " + "{a=" * 5000 + "1" + "}" * 5000, ("nested too deeply",)),
        ("a = " + "9" * 5000, ("too many digits",)),
        ("a = 0." + "9" * 10_000, ("more than 5,000 digits",)),
        ("a = 2024-02-31", ("not valid TOML: invalid date",)),
        ("a = '\ud800'", ("half a character",)),
        ("a" + ".a" * 100_000 + " = 1", ("line 1: a key has more than 50 parts",)),
        ("[a" + ".a" * 100_000 + "]", ("line 1: a key has more than 50 parts",)),
        ("x = { a" + ".'a'" * 1000 + " = 1 }", ("a key has more than 50 parts",)),
        ("a = 1\rb = 2", ("not valid TOML",)),
        ("a = \x00", ("not valid TOML",)),
        ("# " + "x" * 16_000_000, ("larger than 16 MB",)),
    ],
)
def test_texts(text: str, parts: tuple[str, ...]) -> None:
    with pytest.raises(ScenarioError) as caught:
        loads(text)
    for part in parts:
        assert part in str(caught.value)
    assert len(str(caught.value)) < 2000


def test_a_byte_order_mark_is_no_part_of_the_text(tmp_path: Path) -> None:
    assert loads("\ufeff" + PLAIN).text == PLAIN
    path = tmp_path / "marked.toml"
    path.write_bytes(b"\xef\xbb\xbf" + PLAIN.encode())
    assert load(path).text == PLAIN


def test_numbers_stay_decimal() -> None:
    assert to_data("a = [0.1, 1_0.50, 2]")["a"] == [Decimal("0.1"), Decimal("10.50"), 2]


def test_files(tmp_path: Path) -> None:
    good = tmp_path / "good.toml"
    good.write_text(PLAIN, encoding="utf-8")
    assert load(good).folder == str(tmp_path)
    assert load(str(good)).text == PLAIN
    latin = tmp_path / "latin.toml"
    latin.write_bytes("# ok\n# é".encode("latin-1"))
    large = tmp_path / "large.toml"
    large.write_bytes(b"#" * 16_000_001)
    other = tmp_path / "good.txt"
    other.write_text(PLAIN, encoding="utf-8")
    for path, part in [
        (tmp_path / "none.toml", "there is no such file"),
        (tmp_path, "this is a directory"),
        (latin, "line 2 is not UTF-8"),
        (large, "larger than 16 MB"),
        (other, "has the extension .toml"),
        ("a\0.toml", "no such file"),
        ("/dev/null/x.toml", "no such file"),
    ]:
        with pytest.raises(ScenarioError, match=part):
            load(path)


def test_line_ends_of_other_systems() -> None:
    assert loads(PLAIN.replace("\n", "\r\n")).title == "Plain"


@pytest.mark.parametrize(
    ("definitions", "part"),
    [
        ([f"d{i} = 'd{i - 1} + d{i - 1}'" if i else "d0 = '1'" for i in range(40)], "more than 100,000 names"),
        ([f"d{i} = 'd{i - 1}'" if i else "d0 = '1'" for i in range(51)], "more than 50 definitions"),
        ([f"d{i} = 'd{i + 1}'" for i in range(3000)] + ["d3000 = 'd0'"], "goes in a circle"),
        ([f"d{i} = '{' + '.join(['S'] * 2000)}'" for i in range(14)] + ["x = 'd1'"], ""),
    ],
)
def test_definitions_are_counted_not_written_out(definitions: list[str], part: str) -> None:
    text = PLAIN.replace("[definitions]", "[definitions]\n" + "\n".join(definitions))
    if part:
        with pytest.raises(ScenarioError, match=part) as caught:
            loads(text)
        assert len(caught.value.problems) == 1
    else:
        loads(text)


def test_fifty_definitions_deep_load() -> None:
    definitions = [f"d{i} = 'd{i - 1}'" if i else "d0 = '1'" for i in range(50)]
    assert len(loads(PLAIN.replace("[definitions]", "[definitions]\n" + "\n".join(definitions))).definitions) == 52


def test_what_is_used_is_counted_together() -> None:
    flows = "".join(
        f'\n[[flow]]\nfrom = "S"\nrate = "{" + ".join(["big"] * 60)}"\nkind = "transition"\n' for _ in range(20)
    )
    text = PLAIN.replace("[definitions]", f"[definitions]\nbig = '{'+'.join(['S'] * 100)}'") + flows
    with pytest.raises(ScenarioError, match="flows: written out, the expressions have more than 100,000"):
        loads(text)


def test_types_are_limited() -> None:
    groups = ", ".join(f'"{i}"' for i in range(500))
    text = PLAIN.replace("[compartments]", f"[dimensions]\na = [{groups}]\nb = [{groups}]\n[compartments]")
    with pytest.raises(ScenarioError, match=r"compartments\.E: has 250,000 copies\. A model has at most 200,000 types"):
        loads(text.replace("E = { infected = true }", 'E = { infected = true, by = ["a", "b"] }'))
    with pytest.raises(ScenarioError, match=r"parameters\.beta: has 250,000 values"):
        loads(text.replace('unit = "1/day", range', 'by = ["a", "b"], range', 1))


def test_a_file_full_of_mistakes_ends_soon() -> None:
    flows = "".join(f'\n[[flow]]\nfrom = "S"\nrate = "beto{i} * S"\nkind = "transition"\n' for i in range(20_000))
    with pytest.raises(ScenarioError, match="more problems"):
        loads(PLAIN + flows)


def test_expressions_have_limits() -> None:
    for rate in ("(" * 5000 + "S" + ")" * 5000, "S" * 2_000_000, "S+" * 1_000_000 + "S", "-" * 5000 + "S"):
        with pytest.raises(ScenarioError, match="flow 1"):
            loads(PLAIN.replace("foi * S", rate))


def test_memory_stays_small() -> None:
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    with pytest.raises(ScenarioError):
        loads(PLAIN.replace("foi * S", "9^9^9^9 * S"))
    assert resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - before < 100_000  # kB
