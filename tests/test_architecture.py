"""Who may import whom, as data: the layers stay apart only if something looks."""

from __future__ import annotations

import ast
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
PACKAGE = ROOT / "ngm"

#: layer -> the layers it may import besides itself; `ngm` stands for the public names of `ngm/__init__.py`
MAY_IMPORT: dict[str, set[str]] = {
    "errors": set(),
    "results": {"results_season"},
    "results_season": set(),
    "results_course": set(),
    "results_control": {"results"},
    "results_mixing": {"results"},
    "results_draws": {"spreadsheet"},
    "results_sensitivity": {"results", "results_mixing", "results_draws"},
    "results_opinion": {"results"},
    "results_outbreak": {"results"},
    "engine": set(),
    "expression": {"errors"},
    "scenario": {"errors", "expression"},
    # The classes of a graph are arrays in, arrays out: the one thing of the engine that symbols need too.
    "derivation": {"errors", "expression", "scenario", "results", "engine.structure"},
    "worker": {"errors", "expression.tree", "results", "scenario", "derivation"},
    "analysis": {
        "results_outbreak",
        "results_season",
        "results_course",
        "errors",
        "expression",
        "scenario",
        "derivation",
        "engine",
        "results",
        "results_control",
        "results_mixing",
        "results_sensitivity",
        "results_opinion",
        "worker",
        "progress",
        "results_draws",
    },
    "wording_course": {"results_course"},
    "wording": {"results", "results_control", "results_draws"},
    "typed": {"errors"},
    "meanings": set(),
    "progress": set(),
    "spreadsheet": set(),
    "charts": {
        "results",
        "results_outbreak",
        "results_course",
        "results_season",
        "results_control",
        "results_mixing",
        "results_sensitivity",
        "results_draws",
    },
    "drafts": {"errors"},
    "reporting": {
        "results_outbreak",
        "results_course",
        "results_season",
        "wording_course",
        "ngm",
        "errors",
        "results",
        "results_control",
        "results_mixing",
        "results_opinion",
        "results_sensitivity",
        "analysis.solve",
        "charts",
        "expression.names",
        "expression.parse",
        "expression.tree",
        "expression.typeset",
        "scenario.exact",
        "scenario.following",
        "scenario.model",
        "worker",
    },
    "screens": {
        "results_outbreak",
        "results_course",
        "results_season",
        "wording_course",
        "ngm",
        "meanings",
        "reporting",
        "errors",
        "results",
        "results_control",
        "results_mixing",
        "results_sensitivity",
        "results_opinion",
        "charts",
        "drafts",
        "wording",
        "typed",
        "scenario.csvfile",
        "scenario.edit",
        "scenario.examine",
        "scenario.file",
        "scenario.renaming",
        "expression.typeset",
        "worker",
        "progress",
        "spreadsheet",
        "results_draws",
    },
    "console": {
        "errors",
        "results",
        "results_control",
        "results_season",
        "results_sensitivity",
        "results_draws",
        "console_sensitivity",
    },
    "console_course": {"ngm", "console", "results_course", "typed", "wording_course"},
    "console_outbreak": {"console", "errors", "results_outbreak", "typed"},
    "console_opinion": {"console", "results_opinion"},
    "console_report": {"ngm", "errors", "typed", "reporting", "worker"},
    "console_draws": {"ngm", "errors", "results_draws", "results_sensitivity", "typed", "wording"},
    "console_sensitivity": {"console", "results_draws", "results_sensitivity"},
    "console_control": {"console", "results_control", "wording", "results_draws"},
    "__main__": {
        "console_course",
        "console_outbreak",
        "ngm",
        "errors",
        "results",
        "results_control",
        "results_sensitivity",
        "results_opinion",
        "charts",
        "console",
        "console_control",
        "console_opinion",
        "console_report",
        "typed",
        "worker",
        "spreadsheet",
        "results_draws",
        "console_draws",
    },
    "__init__": {"errors", "results", "scenario", "analysis", "reporting"},
}

#: modules of a layer that the layer's own rule leaves out
NOT_FOR: dict[str, set[str]] = {"scenario": {"expression.symbolic"}}

#: library -> the only places that may import it
ONLY_IN: dict[str, set[str]] = {
    "sympy": {"expression.symbolic", "derivation"},
    "mpmath": {"derivation"},
    "scipy": {"engine"},
    "flint": {"engine"},
    "altair": {"charts"},
    "streamlit": {"screens", "app"},
    "pypandoc": {"reporting.forms"},
    "typst": {"reporting.forms"},
    "vl_convert": {"reporting"},
}


def sources() -> list[Path]:
    return [*sorted(PACKAGE.rglob("*.py")), ROOT / "app.py"]


def dotted(path: Path) -> str:
    """Return a file's place below ngm in dots: `scenario.file`, `engine` for a package's own file, `app`."""
    if path == ROOT / "app.py":
        return "app"
    parts = list(path.relative_to(PACKAGE).with_suffix("").parts)
    if parts[-1] == "__init__" and len(parts) > 1:
        parts.pop()
    return ".".join(parts)


def imported(path: Path) -> Iterator[tuple[str, int]]:
    """Yield the full name of everything that a file imports, wherever it does so, with the line."""
    here = ["ngm", *dotted(path).split(".")] if path != ROOT / "app.py" else ["app"]
    package = here if path.name == "__init__.py" else here[:-1]
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            for alias in node.names:
                yield alias.name, node.lineno
        elif isinstance(node, ast.ImportFrom):
            base = package[: len(package) - node.level + 1] if node.level else []
            module = ".".join([*base, *([node.module] if node.module else [])])
            for alias in node.names:
                yield f"{module}.{alias.name}", node.lineno


def starts_with(name: str, prefix: str) -> bool:
    return name == prefix or name.startswith(prefix + ".")


def is_own(name: str) -> bool:
    """Return whether the name leads to a file of ours, and not to a name that `ngm/__init__.py` offers."""
    parts = name.split(".")
    return (
        parts[0] == "ngm"
        and len(parts) > 1
        and ((PACKAGE / parts[1]).is_dir() or (PACKAGE / f"{parts[1]}.py").is_file())
    )


def layer(place: str) -> str:
    return place.split(".")[0]


def test_every_layer_has_a_rule():
    places = {layer(dotted(path)) for path in sources()} - {"app"}
    assert places == set(MAY_IMPORT)


@pytest.mark.parametrize("path", sources(), ids=dotted)
def test_imports_run_one_way(path):
    place = dotted(path)
    allowed = {"ngm", "screens"} if place == "app" else MAY_IMPORT[layer(place)] | {layer(place)}
    for name, line in imported(path):
        where = f"{path.relative_to(ROOT)}, line {line}: {name}"
        if not starts_with(name, "ngm"):
            continue
        if not is_own(name):
            assert "ngm" in allowed, f"{where}: this layer may not use the public names"
            continue
        target = name.removeprefix("ngm.")
        assert any(starts_with(target, permitted) for permitted in allowed), f"{where} is not allowed"
        assert not any(starts_with(target, refused) for refused in NOT_FOR.get(layer(place), ())), where


@pytest.mark.parametrize("path", sources(), ids=dotted)
def test_libraries_stay_in_their_places(path):
    for name, line in imported(path):
        library = name.split(".")[0]
        if library in ONLY_IN:
            assert any(starts_with(dotted(path), place) for place in ONLY_IN[library]), (
                f"{path.relative_to(ROOT)}, line {line}: {library} belongs in {sorted(ONLY_IN[library])}"
            )


def test_every_library_is_pinned():
    pinned = {line.partition("==")[0] for line in (ROOT / "requirements.txt").read_text(encoding="utf-8").splitlines()}
    named = {"python-flint": "flint", "pypandoc_binary": "pypandoc", "vl-convert-python": "vl_convert"}
    modules = {named.get(name, name) for name in pinned}
    ours = [*sources(), *sorted((ROOT / "tests").rglob("*.py"))]
    trees = [ast.parse(path.read_text(encoding="utf-8")) for path in ours]
    nodes = [node for tree in trees for node in ast.walk(tree)]
    used = {alias.name.split(".")[0] for node in nodes if isinstance(node, ast.Import) for alias in node.names}
    used |= {str(node.module).split(".")[0] for node in nodes if isinstance(node, ast.ImportFrom) and not node.level}
    assert used - set(sys.stdlib_module_names) - {"ngm", "tests"} <= modules


@pytest.mark.parametrize("path", sources(), ids=dotted)
def test_no_text_is_executed(path):
    # A user's text is parsed by our own parser only. Names of functions that would run it must not even occur.
    tree = ast.parse(path.read_text(encoding="utf-8"))
    for node in ast.walk(tree):
        if isinstance(node, ast.Call):
            name = node.func.id if isinstance(node.func, ast.Name) else getattr(node.func, "attr", "")
            assert name not in {"eval", "exec", "sympify", "parse_expr", "lambdify", "parse_latex", "__import__"}, (
                f"{path.relative_to(ROOT)}, line {node.lineno}: {name}"
            )


@pytest.mark.parametrize("path", sources(), ids=dotted)
def test_files_stay_short(path):
    assert len(path.read_text(encoding="utf-8").splitlines()) <= 460


def loaded_after(statement: str) -> set[str]:
    code = f"import sys\n{statement}\nprint(*sorted(sys.modules))"
    done = subprocess.run([sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, check=True)
    return set(done.stdout.split())


def test_importing_the_package_is_light():
    loaded = loaded_after("import ngm")
    assert "ngm" in loaded
    assert not loaded & {"streamlit", "altair", "sympy", "pandas", "scipy"}


def test_reading_a_scenario_is_light():
    path = next((ROOT / "scenarios").glob("*.toml"))
    loaded = loaded_after(f"import ngm; ngm.load({str(path)!r})")
    assert not loaded & {"streamlit", "altair", "sympy", "pandas", "scipy"}


def test_solving_needs_no_page_and_no_chart():
    path = next((ROOT / "scenarios").glob("*.toml"))
    loaded = loaded_after(f"import ngm; ngm.solve(ngm.load({str(path)!r}))")
    assert not loaded & {"streamlit", "altair"}


def test_public_names():
    import ngm

    assert sorted(ngm.__all__) == list(ngm.__all__)
    for name in ngm.__all__:
        assert hasattr(ngm, name)
    assert {"Scenario", "control", "load", "loads", "solve"} <= set(ngm.__all__)
    public = {name for name in vars(ngm) if not name.startswith("_")}
    modules = {name for name in public if (PACKAGE / name).is_dir() or (PACKAGE / f"{name}.py").is_file()}
    assert public - modules - set(ngm.__all__) <= {"annotations", "Any", "TYPE_CHECKING"}
