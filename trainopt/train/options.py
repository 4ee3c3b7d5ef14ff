"""The module counts a medium can be bought in, their costs, and the caps on how far each may be loaded.

model.md, section 3. Areas in m², loadings in L/m², costs per batch in the catalog's currency.
"""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Mapping, Sequence, Set
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from trainopt.curves.curve import LotCurve
from trainopt.curves.sampled import SampledCurves
from trainopt.train.problem import Dropped, Floats, Options, OwnedHolder

if TYPE_CHECKING:
    from trainopt.files import Catalog, Costs, Holder, Medium

CAP_SLACK = 1e-12
"""Relative room for rounding when a loading is held against its cap."""


@dataclass(frozen=True)
class Duty:
    """What a stage is sized for: volume L, safety factor F, and what the objective counts.

    `shared`: holder types whose owned ones other stages may use as well.
    """

    volume: float
    safety_factor: float
    objective: str
    operation: str
    shared: Set[str] = frozenset()


@dataclass(frozen=True)
class Cap:
    """The highest design loading a medium may get, L/m², and the limit it comes from."""

    loading: float
    reason: str

    def holds(self, loading: Floats) -> NDArray[np.bool_]:
        """Whether each loading is inside the cap."""
        return loading <= self.loading * (1.0 + CAP_SLACK)


def cheapest_holder(
    holders: Mapping[str, Holder], module: str, counts: NDArray[np.int64], shared: Set[str] = frozenset()
) -> tuple[tuple[tuple[str, int] | None, ...], Floats]:
    """For each count the holder type and number that cost least per batch (ties: fewer, then by name), and the cost.

    Those that are owned cost nothing; but the cost that is returned for a type in `shared` is that of all of them.
    """
    usable = [(name, holder) for name, holder in sorted(holders.items()) if module in holder.modules]
    if not usable:
        return (None,) * len(counts), np.zeros(len(counts))
    chosen: list[tuple[str, int] | None] = []
    costs = np.empty(len(counts))
    for index, count in enumerate(counts.tolist()):
        offers = []
        for name, holder in usable:
            number = -(-count // holder.slots)
            offers.append((max(number - holder.owned, 0) * holder.price / holder.batches, number, name))
        cost, number, name = min(offers)
        chosen.append((name, number))
        costs[index] = number * price_per_batch(holders[name]) if name in shared else cost
    return tuple(chosen), costs


def price_per_batch(holder: Holder) -> float:
    """Price of one holder, spread over its batches."""
    return holder.price / holder.batches


def most_credit(options: Options, owned: Sequence[OwnedHolder]) -> Floats:
    """price·min(owned, number) of each option's holders, per batch, shape (n,): all that the owned ones can save it.

    Over a train they save Σ_h price_h·min(owned_h, Σ number_h), which is never more than the sum of its options' own.
    """
    known = {holder.name: holder for holder in owned}
    credit = np.zeros(len(options))
    for place, one in enumerate(options.holders) if known else ():
        if one is not None and one[0] in known:
            credit[place] = known[one[0]].price * min(known[one[0]].owned, one[1])
    return credit


def cost_alone(options: Options, owned: Sequence[OwnedHolder]) -> Floats:
    """Cost of each option per batch, hours left out, in a train where no other stage uses the owned holders."""
    cost = options.modules_cost + options.holders_cost + options.flush_cost + options.product_cost
    return np.asarray(cost - most_credit(options, owned))


def least_weight(options: Options, owned: Sequence[OwnedHolder], objective: str) -> Floats:
    """The least that each option can add to the objective: its weight, for cost less all it can save."""
    return options.weight - most_credit(options, owned) if owned and objective == "cost" else options.weight


def demand(curves: Sequence[LotCurve], operation: str, loading: Floats) -> Floats:
    """D in bar·h, shape (lots, n), of each design loading in L/m² (model.md, section 1); infinite past a pole."""
    if isinstance(curves, SampledCurves):
        return curves.demand(operation, np.asarray(loading, dtype=np.float64))
    if operation == "constant-pressure":
        return np.array([curve.demand_constant_pressure(loading) for curve in curves])
    return np.array([curve.demand_constant_flow(loading) for curve in curves])


def module_options(
    medium: Medium, module: str, catalog: Catalog, costs: Costs, duty: Duty, counts: NDArray[np.int64]
) -> Options:
    """The options of one module type, before any cap; `demand` is left empty."""
    entry = catalog.modules[module]
    area = np.asarray(counts * entry.area, dtype=np.float64)
    holders, holders_cost = cheapest_holder(catalog.holders, module, counts, duty.shared)
    flush = medium.flush.volume if medium.flush is not None else 0.0
    product = costs.product
    lost = (1.0 - product.recovered) * product.titer * product.value if product is not None else 0.0
    modules_cost: Floats = np.asarray(counts * entry.price, dtype=np.float64)
    flush_cost: Floats = np.asarray(flush * costs.flush * area)
    product_cost: Floats = np.asarray(lost * entry.hold_up * counts, dtype=np.float64)
    total: Floats = modules_cost + holders_cost + flush_cost + product_cost
    return Options(
        module=(module,) * len(counts),
        count=counts,
        holders=holders,
        area=area,
        modules_cost=modules_cost,
        holders_cost=holders_cost,
        flush_cost=flush_cost,
        product_cost=product_cost,
        weight=area if duty.objective == "area" else total,
        shortest_time=np.zeros(len(counts)),
        loading=duty.safety_factor * duty.volume / (medium.scale_up * area),
        demand=np.zeros((0, len(counts))),
    )


def take(options: Options, index: NDArray[np.intp]) -> Options:
    """The options at `index`, in that order."""
    places = index.tolist()
    return Options(
        module=tuple(options.module[i] for i in places),
        count=options.count[index],
        holders=tuple(options.holders[i] for i in places),
        area=options.area[index],
        modules_cost=options.modules_cost[index],
        holders_cost=options.holders_cost[index],
        flush_cost=options.flush_cost[index],
        product_cost=options.product_cost[index],
        weight=options.weight[index],
        shortest_time=options.shortest_time[index],
        loading=options.loading[index],
        demand=options.demand[:, index],
    )


def joined(parts: Sequence[Options]) -> Options:
    """Several module types' options as one table."""
    if not parts:
        empty = np.zeros(0)
        return Options((), np.zeros(0, dtype=np.int64), (), *(empty,) * 8, np.zeros((0, 0)))
    return Options(
        module=tuple(name for part in parts for name in part.module),
        count=np.concatenate([part.count for part in parts]),
        holders=tuple(holder for part in parts for holder in part.holders),
        area=np.concatenate([part.area for part in parts]),
        modules_cost=np.concatenate([part.modules_cost for part in parts]),
        holders_cost=np.concatenate([part.holders_cost for part in parts]),
        flush_cost=np.concatenate([part.flush_cost for part in parts]),
        product_cost=np.concatenate([part.product_cost for part in parts]),
        weight=np.concatenate([part.weight for part in parts]),
        shortest_time=np.concatenate([part.shortest_time for part in parts]),
        loading=np.concatenate([part.loading for part in parts]),
        demand=np.concatenate([part.demand for part in parts], axis=1),
    )


def inside_caps(
    options: Options,
    cap: Cap,
    curves: Sequence[LotCurve],
    operation: str,
    flux_limit: float,
    volume: float,
    may_fail: int = 0,
) -> tuple[Options, tuple[Dropped, ...]]:
    """The options that exist, with D and τ filled in, and why the others do not.

    An option exists if D is finite for all lots but `may_fail`.
    """
    dropped: list[Dropped] = []
    module = options.module[0] if options.module else ""
    fits = cap.holds(options.loading)
    if not fits.all():
        text = f"{int((~fits).sum())} counts load more than {cap.loading:.4g} L/m2 ({_CAP_WORDS[cap.reason]})"
        dropped.append(Dropped(cap.reason, module, int((~fits).sum()), cap.loading, text))
        options = take(options, np.flatnonzero(fits))
    spent = demand(curves, operation, options.loading)
    finite = (~np.isfinite(spent)).sum(axis=0) <= may_fail
    if not finite.all():
        pole = sorted(curve.pole for curve in curves)[may_fail]
        text = f"{int((~finite).sum())} counts load past {pole:.4g} L/m2, where the fitted resistance is infinite"
        dropped.append(Dropped("pole", module, int((~finite).sum()), pole, text))
    filled = replace(options, demand=spent, shortest_time=volume / (options.area * flux_limit))
    return (filled if finite.all() else take(filled, np.flatnonzero(finite))), tuple(dropped)


_CAP_WORDS = {
    "loading-tested": "the highest loading tested, for the worst lot",
    "loading-limit": "the loading limit of the medium",
    "turbidity": "where the filtrate reaches the turbidity limit",
}


def undominated(options: Options, owned: Sequence[OwnedHolder] = (), objective: str = "area") -> NDArray[np.intp]:
    """Places of the options that no other of the same medium beats, ordered by area.

    Within one medium D (every lot) and τ fall as area grows, so an option is beaten exactly by one of at least
    its area and at most its weight. Ties go to the lower cost, then the lower count, then the name.

    For cost, with holders that are `owned` and shared over the train, an option is beaten only by one whose weight is
    at most its own less all that the owned ones can save it. Exchange the two in any design: the option's weight w goes
    and with it at most c = price·min(owned, number) of the train's savings (these grow by no more than c when the
    option joins the others); the other's weight w' ≤ w − c comes, and savings do not fall by its joining. So the
    design gets no dearer. One that beats an option that beats a third beats the third, so nothing is dropped in
    favor of one that is itself dropped for good.
    """
    cost, least = cost_alone(options, owned), least_weight(options, owned, objective).tolist()
    keys = zip(options.weight.tolist(), (-options.area).tolist(), cost.tolist(), options.count.tolist(), options.module,
               strict=True)  # fmt: skip
    order = [place for _, place in sorted((key, place) for place, key in enumerate(keys))]
    weights = [float(options.weight[place]) for place in order]
    kept: list[int] = []
    largest = [0.0]  # among the kept of the first so many in order
    for k, place in enumerate(order):
        rivals = min(k, bisect_right(weights, least[place]))
        keep = bool(options.area[place] > largest[rivals] * (1.0 + CAP_SLACK))
        if keep:
            kept.append(place)
        largest.append(max(largest[-1], float(options.area[place])) if keep else largest[-1])
    kept.sort(key=lambda place: (options.area[place], options.module[place], options.count[place]))
    return np.array(kept, dtype=np.intp)
