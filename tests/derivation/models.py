"""Models that are built, not typed: chains, hosts with vectors, patches. Rates are parameters, so that symbols have work."""

from __future__ import annotations

from collections.abc import Sequence


def text(
    compartments: Sequence[tuple[str, bool]],
    parameters: dict[str, float],
    flows: Sequence[tuple[str, str, str, str]],
    *,
    definitions: dict[str, str] | None = None,
    free: dict[str, str | float] | None = None,
) -> str:
    """Return a scenario. Flows are (from, to, rate, kind), "" for outside; kind "t" is transmission, "x" transition."""
    lines = ['[scenario]\ntitle = "Built for a test"\ntime_unit = "day"\n', "[compartments]"]
    lines += [f"{name} = {{ infected = {str(infected).lower()} }}" for name, infected in compartments]
    lines.append("\n[parameters]")
    lines += [f"{name} = {{ value = {value!r} }}" for name, value in parameters.items()]
    if definitions:
        lines.append("\n[definitions]")
        lines += [f'{name} = "{expression}"' for name, expression in definitions.items()]
    for source, target, rate, kind in flows:
        lines.append("\n[[flow]]")
        lines += [f'from = "{source}"'] if source else []
        lines += [f'to = "{target}"'] if target else []
        lines.append(f'rate = "{rate}"')
        lines.append(f'kind = "{"transmission" if kind == "t" else "transition"}"')
    if free:
        lines.append("\n[infection_free]")
        lines += [f'{name} = "{value}"' for name, value in free.items()]
    return "\n".join(lines) + "\n"


def chain(latent: int = 20, infectious: int = 20) -> str:
    """Return a chain of latent and infectious stages with deaths in each."""
    stages = [f"E{k}" for k in range(1, latent + 1)] + [f"I{k}" for k in range(1, infectious + 1)]
    parameters = {"mu": 0.001}
    parameters |= {f"rate_{name}": 0.5 + 0.01 * k for k, name in enumerate(stages)}
    parameters |= {f"beta{k}": 0.02 + 0.001 * k for k in range(1, infectious + 1)}
    force = " + ".join(f"beta{k}*I{k}" for k in range(1, infectious + 1))
    flows = [("", "S", "mu", "x"), ("S", "", "mu*S", "x"), ("S", stages[0], f"S*({force})", "t")]
    for name, following in zip(stages, [*stages[1:], ""], strict=True):
        flows += [(name, following, f"rate_{name}*{name}", "x"), (name, "", f"mu*{name}", "x")]
    return text([("S", False), *((name, True) for name in stages)], parameters, flows)


def hosts_and_vectors(hosts: int = 3, vectors: int = 3) -> str:
    """Return hosts and vectors that infect each other, each with a latent and an infectious state."""
    compartments: list[tuple[str, bool]] = []
    parameters: dict[str, float] = {}
    flows: list[tuple[str, str, str, str]] = []
    for side, other, count, others in (("h", "v", hosts, vectors), ("v", "h", vectors, hosts)):
        for k in range(1, count + 1):
            here = f"{side}{k}"
            compartments += [(f"S{here}", False), (f"E{here}", True), (f"I{here}", True)]
            parameters |= {
                f"birth_{here}": 2.0 + k,
                f"mu_{here}": 0.1 * k,
                f"nu_{here}": 0.2 + 0.1 * k,
                f"g_{here}": 0.3,
            }
            force = " + ".join(f"b_{here}_{other}{j}*I{other}{j}" for j in range(1, others + 1))
            parameters |= {f"b_{here}_{other}{j}": 0.01 * (k + j) for j in range(1, others + 1)}
            flows += [
                ("", f"S{here}", f"birth_{here}", "x"),
                (f"S{here}", "", f"mu_{here}*S{here}", "x"),
                (f"S{here}", f"E{here}", f"S{here}*({force})", "t"),
                (f"E{here}", f"I{here}", f"nu_{here}*E{here}", "x"),
                (f"E{here}", "", f"mu_{here}*E{here}", "x"),
                (f"I{here}", "", f"(mu_{here} + g_{here})*I{here}", "x"),
            ]
    return text(compartments, parameters, flows)


def patches(count: int = 5) -> str:
    """Return patches with everybody moving everywhere: latent and infectious in each."""
    compartments: list[tuple[str, bool]] = []
    parameters: dict[str, float] = {"sigma": 0.25, "gamma": 0.2, "mu": 0.01}
    flows: list[tuple[str, str, str, str]] = []
    for k in range(1, count + 1):
        compartments += [(f"S{k}", False), (f"E{k}", True), (f"I{k}", True)]
        parameters |= {f"beta{k}": 0.2 + 0.05 * k, f"N{k}": 100.0 * k}
        flows += [
            (f"S{k}", f"E{k}", f"beta{k}*S{k}*I{k}/N{k}", "t"),
            (f"E{k}", f"I{k}", f"sigma*E{k}", "x"),
            (f"I{k}", "", f"(gamma + mu)*I{k}", "x"),
            (f"E{k}", "", f"mu*E{k}", "x"),
        ]
        for j in range(1, count + 1):
            if j != k:
                parameters[f"m{k}_{j}"] = 0.001 * (k + 2 * j)
                flows += [(f"{c}{k}", f"{c}{j}", f"m{k}_{j}*{c}{k}", "x") for c in "EI"]
    return text(compartments, parameters, flows, free={f"S{k}": f"N{k}" for k in range(1, count + 1)})
