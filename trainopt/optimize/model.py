"""The Pyomo model of a design problem: it only declares and wires; the algebra is in `constraints.py`."""

from __future__ import annotations

from typing import Any

import pyomo.core as pyo

from trainopt.optimize import chance
from trainopt.optimize import constraints as rows
from trainopt.optimize.index import Index


def build_model(index: Index) -> Any:
    """The mixed-integer model of an indexed (and usually pruned) problem, as a Pyomo `ConcreteModel`.

    Variables: `x[stage, medium, module, count]` binary, `t[block]` in h, `f[from, to]` where routes branch, for cost
    `r[holder]` the owned holders in use where stages share them, and on a reliability basis `y[lot]` binary, by the
    places of the lots that may be spared.
    """
    problem = index.problem
    model = pyo.ConcreteModel(name="pressure_budget")
    names = [block.name for block in problem.blocks]
    model.x = pyo.Var(index.names, within=pyo.Binary)
    model.t = pyo.Var(names, bounds=lambda _, name: rows.time_bounds(index, names.index(name)))
    x, t = list(model.x.values()), list(model.t.values())

    if index.plain:
        _add(model, "one_option", dict(rows.one_option(index, x)))
    else:
        model.f = pyo.Var(index.arcs, bounds=(0.0, 1.0))
        arcs = dict(model.f.items())
        model.route_start = pyo.Constraint(expr=rows.route_start(arcs))
        _add(model, "route_in", dict(rows.route_in(index, x, arcs)))
        _add(model, "route_out", dict(rows.route_out(index, x, arcs)))
    if problem.may_fail:
        _add_sampled(model, index, x, t)
    else:
        _add(model, "pressure_budget", dict(rows.pressure_budget(index, x, t)))
        _add(model, "differential_rating", dict(rows.differential_rating(index, x, t)))
        _add(model, "inlet_rating", dict(rows.inlet_rating(index, x, t)))
    _add(model, "flux_limit", dict(rows.flux_limit(index, x, t)))
    if problem.schedule == "sequential":
        model.batch_time = pyo.Constraint(expr=rows.batch_time(index, t))

    cost = [(float(w), v) for w, v in zip(index.weight.tolist(), x, strict=True)]
    if problem.objective == "cost" and problem.hour_rate > 0.0:
        cost += [(problem.hour_rate, v) for v in t]
    uses = rows.holder_uses(index) if problem.shares_cost else {}
    if uses:
        shared = {holder.name: holder for holder in problem.owned if holder.name in uses}
        model.r = pyo.Var(list(shared), bounds=lambda _, name: (0.0, shared[name].owned))
        r = dict(model.r.items())
        _add(model, "owned_holders", dict(rows.owned_holders(index, x, r)))
        cost += [(-holder.price, r[name]) for name, holder in shared.items()]
    model.objective = pyo.Objective(expr=rows.linear(cost))
    return model


def _add_sampled(model: Any, index: Index, x: list[Any], t: list[Any]) -> None:
    """The pressure rows of sampled lots, some of which may fail."""
    relief = chance.Relief(index)
    model.y = pyo.Var(relief.lots, within=pyo.Binary)
    y = dict(model.y.items())
    if len(y) > index.problem.may_fail:
        model.spared_lots = pyo.Constraint(expr=chance.spared_lots(index, y))
    _add(model, "untested", dict(chance.untested(index, x, y)))
    _add(model, "sampled_budget", dict(chance.sampled_budget(index, x, t, y, relief)))
    _add(model, "sampled_rating", dict(chance.sampled_rating(index, x, t, y)))
    _add(model, "sampled_inlet", dict(chance.sampled_inlet(index, x, t, y, relief)))


def _add(model: Any, name: str, table: dict[Any, rows.Row]) -> None:
    if table:
        setattr(model, name, pyo.Constraint(list(table), rule=lambda _, *key: table[key if len(key) > 1 else key[0]]))
