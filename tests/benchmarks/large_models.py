"""Large grouped models for the benchmarks: written to a folder, with dense contacts, mixing and travel from files."""

from __future__ import annotations

from pathlib import Path

import numpy as np

__all__ = ["write_model"]


def write_model(folder: Path, ages: int, regions: int) -> Path:
    """Write an invented model of ages x regions x 4 infected states and return its scenario file."""
    rng = np.random.default_rng(1)
    contacts = rng.uniform(0.1, 2, (ages, ages))
    mixing = rng.uniform(0.0, 1, (regions, regions))
    mixing /= mixing.sum(axis=1, keepdims=True)
    travel = rng.uniform(0, 0.01 / regions, (regions, regions))
    np.fill_diagonal(travel, 0)
    for name, table in (("contacts", contacts), ("mixing", mixing), ("travel", travel)):
        np.savetxt(folder / f"{name}.csv", table, delimiter=",", fmt="%.12g")
    births = rng.uniform(1, 5, (ages, regions)).round(3).tolist()
    by = 'by = ["age", "region"]'
    states = {"S": False, "E": True, "A": True, "I": True, "H": True, "R": False}
    lines = [
        '[scenario]\ntitle = "Invented infection, ages by regions"\ntime_unit = "day"\n\n[dimensions]',
        "age = [" + ", ".join(f'"age {k}"' for k in range(ages)) + "]",
        "region = [" + ", ".join(f'"region {k}"' for k in range(regions)) + "]",
        "\n[compartments]",
        *(f"{name} = {{ infected = {str(infected).lower()}, {by} }}" for name, infected in states.items()),
        "\n[parameters]",
        "beta = { value = 0.03 }\nsigma = { value = 0.25 }\ngamma = { value = 0.2 }\np = { value = 0.6 }",
        "h = { value = 0.05 }\nmu = { value = 0.01 }\nq = { value = 0.5 }",
        f"births = {{ value = {births}, {by} }}",
        '\n[matrices.C]\nby = "age"\nfile = "contacts.csv"',
        '[matrices.M]\nby = "region"\nfile = "mixing.csv"',
        '[matrices.T]\nby = "region"\nfile = "travel.csv"',
        '\n[definitions]\nN = "S + E + A + I + H + R"',
    ]
    flows = [
        ("", "S", "births"),
        ("S", "E", "beta * S * C(M((I + q * A) / N))"),
        ("E", "A", "(1 - p) * sigma * E"),
        ("E", "I", "p * sigma * E"),
        ("I", "H", "h * I"),
        *((name, "R", f"gamma * {name}") for name in "IAH"),
        *((name, "", f"mu * {name}") for name in states),
    ]
    for source, target, rate in flows:
        ends = (f'from = "{source}"\n' if source else "") + (f'to = "{target}"\n' if target else "")
        kind = "transmission" if (source, target) == ("S", "E") else "transition"
        lines.append(f'\n[[flow]]\n{ends}rate = "{rate}"\nkind = "{kind}"')
    lines.append('\n[[movement]]\nmatrix = "T"\nof = ["S", "E", "A", "I", "R"]')
    path = folder / "large.toml"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path
