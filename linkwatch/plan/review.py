"""What a link's own figures say against its plan, before any call is made."""

from linkwatch.plan.layers.serial import Crtp
from linkwatch.plan.model import Direction, LinkPlan

DIRECTIONS: tuple[Direction, Direction] = ("to_site", "from_site")
CRTP_WORTH_KBPS = 1544  # above about 1.5 Mbit/s it loads the router for little: common practice

DUST = 1 + 1e-9  # a limit that is met exactly, but for float dust, is kept


def doubts(link: LinkPlan) -> list[str]:
    """Returns what does not fit together in the plan of a link, a sentence each."""
    ways: dict[str, list[Direction]] = {}
    for way in DIRECTIONS:
        for doubt in _of_limits(link, way):
            ways.setdefault(doubt, []).append(way)
    return [f"{_said(found)}: {doubt}" for doubt, found in ways.items()] + _of_link(link)


def _said(ways: list[Direction]) -> str:
    return "each way" if len(ways) > 1 else ways[0].replace("_", " ")


def _of_limits(link: LinkPlan, way: Direction) -> list[str]:
    budget = link.budget_for(way)
    capacity = getattr(link.capacity, way) if link.capacity else None
    found = []
    if budget.calls is not None:
        cost = budget.calls * budget.call_kbps
        sum_up = f"{budget.calls} planned calls cost {cost:.1f} kbit/s"
        if budget.kbps is not None and cost > budget.kbps * DUST:
            fit = budget.calls_that_fit(budget.kbps)
            found.append(f"{sum_up}, the budget is {budget.kbps:g}: {fit} fit")
        if capacity is not None and cost > capacity * DUST:
            fit = budget.calls_that_fit(capacity)
            found.append(f"{sum_up}, the capacity is {capacity:g}: {fit} fit")
    if budget.kbps is not None and capacity is not None and budget.kbps > capacity * DUST:
        found.append(f"the budget of {budget.kbps:g} kbit/s is above the capacity of {capacity:g}")
    if budget.room(0, 0.0) == 0:
        found.append("not one planned call fits beside the reserve")
    return found


def _of_link(link: LinkPlan) -> list[str]:
    found = []
    limited = any(link.budget_for(way).room(0, 0.0) is not None for way in DIRECTIONS)
    if limited and not link.budget.reserve_calls:
        found.append("no reserve: when the budget is full, an emergency call finds no room")
    compressed = any(isinstance(layer, Crtp) for layer in link.framing.layers)
    highest = max(link.capacity.to_site, link.capacity.from_site) if link.capacity else 0.0
    if compressed and highest > CRTP_WORTH_KBPS:
        found.append(
            "crtp above about 1.5 Mbit/s loads the router's processor (common practice): make sure "
            "that it is really switched on there"
        )
    if not link.site_prefixes:
        found.append(
            "no site prefixes: every stream counts, and which direction is which is not known"
        )
    return found
