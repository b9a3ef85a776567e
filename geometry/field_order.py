"""The order of visits that takes the least time, each with a choice of branches."""

import math
from collections.abc import Callable, Sequence
from itertools import combinations, pairwise

# Node: (visit, branch).
Node = tuple[int, int]
Cost = Callable[[Node, Node], float]

# Up to so many visits every order is weighed.
MOST_EXACT = 8


def quickest_order(branches: Sequence[int], cost_s: Cost, first: int | None = None) -> tuple[tuple[int, ...], bool]:
    """Return an order of visits and whether none is quicker; `branches` counts each visit's branches, 1 or more.

    Costs from node to node need not be the same both ways. `first` must come first if given. Beyond 8 visits: the
    nearest next, from every start, then turned pieces (2-opt) and moved visits (or-opt) as long as that helps.
    """
    count = len(branches)
    if count == 0:
        return (), True
    starts = range(count) if first is None else (first,)
    table = {
        (k, p, m, q): cost_s((k, p), (m, q))
        for k in range(count)
        for m in range(count)
        if k != m
        for p in range(branches[k])
        for q in range(branches[m])
    }

    def cost(one: Node, other: Node) -> float:
        return table[(*one, *other)]

    if count <= MOST_EXACT:
        return _of_all(branches, cost, starts), True
    greedy = (_nearest_next(branches, cost, start) for start in starts)
    best = min(greedy, key=lambda order: order_cost(branches, cost, order))
    return _improved(branches, cost, best, fixed=0 if first is None else 1), False


def order_cost(branches: Sequence[int], cost_s: Cost, order: Sequence[int]) -> float:
    """Return the time of an order on its quickest branches."""
    best = [0.0] * branches[order[0]]
    for before, after in pairwise(order):
        best = [
            min(known + cost_s((before, p), (after, q)) for p, known in enumerate(best)) for q in range(branches[after])
        ]
    return min(best)


def _of_all(branches: Sequence[int], cost: Cost, starts: Sequence[int]) -> tuple[int, ...]:
    """Weigh every order, by what is best for each set of visits and each last one (Held and Karp, 1962)."""
    count = len(branches)
    best: dict[tuple[frozenset[int], Node], tuple[float, tuple[int, ...]]] = {
        (frozenset([k]), (k, p)): (0.0, (k,)) for k in starts for p in range(branches[k])
    }
    for size in range(2, count + 1):
        for members in map(frozenset, combinations(range(count), size)):
            for last in members:
                rest = members - {last}
                known = [
                    ((k, p), *best[rest, (k, p)]) for k in rest for p in range(branches[k]) if (rest, (k, p)) in best
                ]
                for q in range(branches[last]) if known else ():
                    best[members, (last, q)] = min(
                        (time + cost(node, (last, q)), (*order, last)) for node, time, order in known
                    )
    everything = frozenset(range(count))
    return min(value for (members, _), value in best.items() if members == everything)[1]


def _nearest_next(branches: Sequence[int], cost: Cost, start: int) -> tuple[int, ...]:
    order = [start]
    left = set(range(len(branches))) - {start}
    while left:
        at = order[-1]
        nearest = min(
            left,
            key=lambda k: min(cost((at, p), (k, q)) for p in range(branches[at]) for q in range(branches[k])),
        )
        order.append(nearest)
        left.remove(nearest)
    return tuple(order)


def _improved(branches: Sequence[int], cost: Cost, order: tuple[int, ...], fixed: int) -> tuple[int, ...]:
    """Turn pieces round and move visits as long as that shortens the order; the first `fixed` visits stay."""
    best, least = order, order_cost(branches, cost, order)
    improved = True
    while improved:
        improved = False
        for other in _neighbours(best, fixed):
            time = order_cost(branches, cost, other)
            if time < least - 1e-9 and not math.isnan(time):
                best, least, improved = other, time, True
                break
    return best


def _neighbours(order: tuple[int, ...], fixed: int) -> list[tuple[int, ...]]:
    found = []
    for i in range(fixed, len(order)):
        for j in range(i + 1, len(order)):
            found.append((*order[:i], *order[i : j + 1][::-1], *order[j + 1 :]))
            found.append((*order[:i], *order[i + 1 : j + 1], order[i], *order[j + 1 :]))
            found.append((*order[:i], order[j], *order[i:j], *order[j + 1 :]))
    return found
