"""What needs what: an order in which everything comes after what it needs, and the circles that prevent one."""

from __future__ import annotations

from collections.abc import Collection, Mapping

__all__ = ["arrows", "order"]


def order(needs: Mapping[str, Collection[str]]) -> tuple[list[str], list[list[str]]]:
    """Return the names so ordered that each comes after all that it needs, and the circles found.

    Names that stand in a circle, or need one that does, are left out of the order. One circle is told for each way
    back that the search meets. Nothing recurses: a chain may have any length.

    Examples
    --------
    >>> order({"N": ["S"], "lambda": ["N"], "S": []})
    (['S', 'N', 'lambda'], [])
    >>> order({"a": ["b"], "b": ["a"]})
    ([], [['a', 'b']])
    """
    done: dict[str, bool] = {}
    path: list[str] = []
    place: dict[str, int] = {}
    out: list[str] = []
    circles: list[list[str]] = []
    for start in needs:
        if start in done:
            continue
        stack = [iter(needs[start])]
        place[start] = len(path)
        path.append(start)
        good = [True]
        while stack:
            for name in stack[-1]:
                if name not in needs:
                    continue
                if name in place:
                    circles.append(path[place[name] :])
                    good[-1] = False
                elif name not in done:
                    place[name] = len(path)
                    path.append(name)
                    good.append(True)
                    stack.append(iter(needs[name]))
                    break
                else:
                    good[-1] = good[-1] and done[name]
            else:
                stack.pop()
                name = path.pop()
                del place[name]
                fine = good.pop()
                done[name] = fine
                if fine:
                    out.append(name)
                if good:
                    good[-1] = good[-1] and fine
    return out, circles


def arrows(circle: list[str], most: int = 8) -> str:
    """Return ``N -> lambda -> N``."""
    shown = circle if len(circle) <= most else [*circle[: most - 1], "…"]
    return " -> ".join([*shown, circle[0]])
