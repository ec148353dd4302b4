"""The command line: exit codes, what goes where, and that text, JSON and Python say the same."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

import ngm
from ngm.__main__ import main
from tests.contract.accepted import MODELS
from tests.contract.bases import GROUPS, PLAIN, edited

ROOT = Path(__file__).parents[2]
NO_R0 = next(model.text for model in MODELS if model.name == "growth larger than loss x" or "negative F" in model.name)


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    files = {"plain.toml": PLAIN, "groups.toml": GROUPS, "none.toml": NO_R0, "wrong.csv": "a,b\n", "empty.toml": ""}
    files["given.toml"] = edited(PLAIN, ('S = "Lambda / mu"', "S = 1000"))
    files["twelve.toml"] = "".join(f"[extra{k}]\n" for k in range(12)) + PLAIN
    for name, text in files.items():
        (tmp_path / name).write_text(text, encoding="utf-8")
    (tmp_path / "latin.toml").write_bytes(PLAIN.replace("Ostwick", "Öst").encode("latin-1"))
    (tmp_path / "wide.toml").write_bytes(PLAIN.encode("utf-16"))
    (tmp_path / "large.toml").write_bytes(b"#" * 16_000_001)
    (tmp_path / "folder.toml").mkdir()
    return tmp_path


# (arguments, parts of the message by hand)
MISUSE: list[tuple[list[str], list[str]]] = [
    ([], ["VERB"]),
    (["slove", "plain.toml"], ["slove", "solve"]),
    (["solve"], ["FILE"]),
    (["solve", ""], ["name of the file is empty"]),
    (["solve", "absent.toml"], ["absent.toml", "no such file"]),
    (["solve", "folder.toml"], ["folder.toml", "directory"]),
    (["solve", "wrong.csv"], ["wrong.csv", ".toml"]),
    (["solve", "plain\0.toml"], ["no such file"]),
    (["solve", "a" * 9000 + ".toml"], ["cannot be read"]),
    (["solve", "latin.toml"], ["latin.toml", "line 2", "UTF-8"]),
    (["solve", "wide.toml"], ["wide.toml", "UTF-8"]),
    (["solve", "large.toml"], ["large.toml", "16 MB"]),
    (["solve", "empty.toml"], ["[scenario]", "[compartments]", "[[flow]]"]),
    (["solve", "twelve.toml"], ["extra0", "extra9", "and 2 more"]),
    (["solve", "plain.toml", "groups.toml"], ["groups.toml"]),
    (["solve", "plain.toml", "--jsn"], ["--jsn"]),
    (["solve", "plain.toml", "--js"], ["--js"]),
    (["solve", "plain.toml", "--set"], ["--set"]),
    (["solve", "plain.toml", "--set", "beta"], ["NAME=VALUE", "'beta'"]),
    (["solve", "plain.toml", "--set", "=1"], ["NAME=VALUE"]),
    (["solve", "plain.toml", "--set", "beta="], ["NAME=VALUE"]),
    (["solve", "plain.toml", "--set", "beta=1", "--set", "beta=2"], ["beta", "twice"]),
    (["solve", "plain.toml", "--set", "beta=1", "--set", "β=2"], ["beta", "twice"]),
    (["solve", "plain.toml", "--set", "betta=1"], ["betta", "Did you mean 'beta'?"]),
    (["solve", "plain.toml", "--set", "a=1", "--set", "b=2"], ["'a'", "'b'"]),
    (["solve", "plain.toml", "--set", "N=1"], ["'N'", "Only parameters"]),
    (["solve", "groups.toml", "--set", "G=1"], ["'G'", "Only parameters"]),
    (["solve", "groups.toml", "--set", "sus[old]=1"], ["sus[old]", "all groups"]),
    (["solve", "plain.toml", "--set", "zzz=1"], ["zzz", "The parameters: beta"]),
    (["solve", "plain.toml", "--set", "beta=-1"], ["beta", "negative"]),
    (["solve", "plain.toml", "--set", "beta=gamma"], ["beta", "without names"]),
    (["solve", "plain.toml", "--set", "beta=0,4"], ["beta", "0.4"]),
    (["solve", "plain.toml", "--set", "beta=40%"], ["beta", "'%'"]),
    (["solve", "plain.toml", "--set", "beta=nan"], ["beta", "nan"]),
    (["solve", "plain.toml", "--set", "beta=1/0"], ["beta", "0"]),
    (["solve", "plain.toml", "--set", "beta=1e300"], ["beta", "1e300"]),
    (["solve", "plain.toml", "--set", "beta=9^9^9^9"], ["beta", "large"]),
    (["solve", "plain.toml", "--set", 'beta=__import__("os").getcwd()'], ["beta", "__import__"]),
    (["solve", "plain.toml", "--set", "beta=" + "1+" * 60_000 + "1"], ["beta", "10,000"]),
    (["solve", "plain.toml", "--set", "b" * 100_000 + "=1"], ["not a parameter"]),
    (["solve", "plain.toml", "--" + "x" * 100_000], ["xxx"]),
    (["solve", "given.toml", "--set", "mu=0.02"], ["infection_free.S", "rest", "expression"]),
    (["control", "given.toml", "--set", "mu=0.02"], ["infection_free.S", "rest"]),
    (["control", "plain.toml", "--set", "mu=0"], ["infection_free.S", "divides by 0"]),
]


@pytest.mark.parametrize(("arguments", "parts"), MISUSE, ids=[" ".join(m[0])[:60] for m in MISUSE])
def test_misuse(
    folder: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
    arguments: list[str],
    parts: list[str],
) -> None:
    monkeypatch.chdir(folder)
    try:
        code = main(arguments)
    except SystemExit as stopped:
        code = stopped.code  # type: ignore[assignment]
    told = capsys.readouterr()
    assert code == 2
    assert told.out == ""
    assert len(told.err) < 2000
    assert "Traceback" not in told.err
    for part in parts:
        assert part in told.err, told.err


@pytest.mark.parametrize("file", ["plain.toml", "groups.toml", "none.toml"])
@pytest.mark.parametrize("verb", ["solve", "control"])
def test_what_is_said_twice_agrees(folder: Path, capsys: pytest.CaptureFixture[str], verb: str, file: str) -> None:
    result = (ngm.solve if verb == "solve" else ngm.control)(ngm.load(folder / file))
    assert main([verb, str(folder / file), "--json"]) == 0
    printed = capsys.readouterr()
    assert printed.err == ""
    record = json.loads(printed.out, parse_constant=lambda word: pytest.fail(f"{word} is no JSON"))
    assert record == json.loads(json.dumps(result.to_json()))
    assert main([verb, str(folder / file)]) == 0
    text = capsys.readouterr().out
    expected = f"R0 = {record['R0']:.6g}" if record["R0"] is not None else "No R0"
    assert expected in text
    for warning in record["warnings"]:
        assert warning in text
    if verb == "solve":
        assert f"growth rate = {record['growth_rate']:.6g} per day" in text


@pytest.mark.parametrize(
    ("given", "values"),
    [
        (["beta=0.3"], {"beta": 0.3}),
        (["beta = 3/10 "], {"beta": "0.3"}),
        (["β=3e-1", "μ=0.02"], {"beta": 0.3, "mu": 0.02}),
        (["sigma=0.5"], {"sigma": "1/2"}),
    ],
)
def test_set_is_with_values(
    folder: Path, capsys: pytest.CaptureFixture[str], given: list[str], values: dict[str, float | str]
) -> None:
    arguments = [word for item in given for word in ("--set", item)]
    assert main(["solve", str(folder / "plain.toml"), "--json", *arguments]) == 0
    changed = ngm.load(folder / "plain.toml").with_values(**values)
    assert json.loads(capsys.readouterr().out) == json.loads(json.dumps(ngm.solve(changed).to_json()))


@pytest.mark.parametrize("encoding", ["ascii"])
def test_a_terminal_of_another_encoding(folder: Path, encoding: str) -> None:
    """A letter that it cannot show does not end the program, and JSON stays JSON."""
    (folder / "greek.toml").write_text(PLAIN.replace("Ostwick", "Ωstwick"), encoding="utf-8")
    environment = {**os.environ, "PYTHONIOENCODING": encoding}

    def run(*options: str) -> subprocess.CompletedProcess[bytes]:
        command = [sys.executable, "-m", "ngm", "solve", str(folder / "greek.toml"), *options]
        return subprocess.run(command, cwd=ROOT, env=environment, capture_output=True, timeout=60)

    text, record = run(), run("--json")
    assert (text.returncode, record.returncode) == (0, 0), text.stderr
    assert b"R0 = 1.8315" in text.stdout
    assert json.loads(record.stdout)["title"] == "Marrow fever in Ωstwick"
