"""Holders that are there already and that several stages may use: counted once over the train, against every design.

The other side (`independent.py`) hands them out stage by stage, and looks at every pick that meets every limit.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from random import Random

import numpy as np
import pytest
from factory import Medium, block, problem, stage
from independent import Option, Spec, best_value, least_time, random_spec, routes, shared_holders, shared_saving, write
from independent import value_of as value_of_picks

import trainopt
from trainopt.files import Case
from trainopt.optimize.bounds import bounds, first_design
from trainopt.optimize.design import prepare
from trainopt.optimize.index import index_problem
from trainopt.optimize.search import best_route
from trainopt.optimize.staircase import staircase
from trainopt.optimize.times import Choice, Route, block_times, objective_of
from trainopt.train.build import prune
from trainopt.train.options import undominated
from trainopt.train.problem import DesignProblem, Options, OwnedHolder

NUMBER = 220


def sharing_spec(seed: int) -> Spec:
    """A random train whose stages share holders, some of them owned; the price of a holder weighs."""
    r = Random(f"holders {seed}")
    spec = random_spec(seed, stages=3, counts=4)
    spec.objective = "cost" if seed % 4 else "area"
    names = sorted(spec.modules)
    spec.holders = {
        f"h{k}": {
            "modules": sorted(r.sample(names, r.randint(2, len(names)))), "slots": r.randint(1, 2),
            "price": round(r.uniform(500, 4000), 2), "batches": r.randint(1, 5), "owned": r.choice([0, 1, 1, 2, 2, 4]),
        }
        for k in range(r.randint(1, 3))
    }  # fmt: skip
    return spec


def sharing_specs(first: int, number: int) -> Iterator[tuple[int, Spec]]:
    """Those of the seeds from `first` on whose stages do share owned holders."""
    for seed in range(first, first + number):
        spec = sharing_spec(seed)
        if shared_holders(spec):
            yield seed, spec


def loaded(spec: Spec, folder: Path) -> Case:
    return trainopt.load_case(write(spec, folder))


def picks_in(blocks: list[list[Option]]) -> tuple[tuple[str, str, int], ...]:
    return tuple((p.medium, p.module, p.count) for one in blocks for p in one)


def named(what: trainopt.Design) -> tuple[tuple[str, str, int], ...]:
    return tuple((p.medium, p.module, p.count) for p in what.picks)


def test_enough_trains_share_and_in_many_the_owned_run_out() -> None:
    specs = list(sharing_specs(0, NUMBER))
    assert len(specs) >= 100
    assert {spec.objective for _, spec in specs} == {"area", "cost"}
    scarce = 0
    for _, spec in specs:
        best = min(routes(spec), key=lambda blocks: value_of_picks(spec, blocks), default=None)
        if best is None or math.isinf(value_of_picks(spec, best)) or spec.objective == "area":
            continue
        picks = [p for one in best for p in one]
        stage_by_stage = sum(shared_saving(spec, [p]) for p in picks)
        scarce += shared_saving(spec, picks) < stage_by_stage * (1.0 - 1e-9)
    # These a count that each stage had to itself would have shown too cheap.
    assert scarce >= 10


@pytest.mark.parametrize("first", range(0, NUMBER, 20))
def test_the_design_is_the_best_of_all_and_its_holders_add_up(first: int, tmp_path: Path) -> None:
    seen = 0
    for seed, spec in sharing_specs(first, 20):
        result = trainopt.design(loaded(spec, tmp_path / str(seed)))
        expected = best_value(spec)
        if math.isinf(expected):
            assert result.status == "infeasible", seed
            continue
        assert result.objective is not None and result.cost_parts is not None
        assert result.objective.value == pytest.approx(expected, rel=1e-9), seed
        # The reported cost, whatever the objective.
        costs = [
            (value_of_picks(replace(spec, objective="cost"), blocks), [p for one in blocks for p in one])
            for blocks in routes(spec)
            if picks_in(blocks) == named(result) and math.isfinite(value_of_picks(spec, blocks))
        ]
        if spec.objective == "cost" or spec.hour == 0.0:
            assert result.cost == pytest.approx(min(cost for cost, _ in costs), rel=1e-9), seed
        holders = [one.holders_cost for part in result.blocks for one in part.stages]
        assert all(cost is not None and cost >= 0.0 for cost in holders)
        assert math.fsum(cost or 0.0 for cost in holders) == pytest.approx(result.cost_parts.holders, abs=1e-9), seed
        picked = costs[0][1]
        own = [p.holder for p in picked]
        full = sum(n * spec.holders[h]["price"] / spec.holders[h]["batches"] for h, n in filter(None, own))
        kept = sum(  # owned ones that one stage alone can use
            min(n, spec.holders[h].get("owned", 0)) * spec.holders[h]["price"] / spec.holders[h]["batches"]
            for h, n in filter(None, own)
            if h not in shared_holders(spec)
        )
        assert result.cost_parts.holders == pytest.approx(full - kept - shared_saving(spec, picked), abs=1e-6), seed
        seen += 1
    assert seen > 4


@pytest.mark.parametrize("first", range(0, 100, 20))
def test_alternatives_and_other_routes_are_the_next_best(first: int, tmp_path: Path) -> None:
    seen = 0
    for seed, spec in sharing_specs(first, 20):
        result = trainopt.design(loaded(spec, tmp_path / str(seed)), alternatives=5, gap=0.3, routes=True)
        if result.status != "optimal":
            continue
        every = [(value_of_picks(spec, blocks), tuple(p.medium for one in blocks for p in one))
                 for blocks in routes(spec)]  # fmt: skip
        every = sorted(one for one in every if math.isfinite(one[0]))
        near, others = result.alternatives, result.routes
        assert near is not None and near.proven and others is not None
        within = [value for value, _ in every if value <= every[0][0] * 1.3 * (1.0 + 1e-9)][:5]
        assert [one.objective for one in near.designs] == pytest.approx(within, rel=1e-9), seed
        if len(others.designs) == others.allowed:
            best = {media: value for value, media in reversed(every)}
            found: dict[tuple[str, ...], float] = {}
            for route in others.designs:
                media = tuple(medium for _, medium in route.media)
                value = math.inf if route.objective is None else route.objective
                found[media] = min(value, found.get(media, math.inf))
            own = tuple(medium for medium, _, _ in named(result))
            for media, value in found.items():
                assert media == own or value == pytest.approx(best.get(media, math.inf), rel=1e-9), (seed, media)
        seen += len(near.designs) > 1
    assert seen > 1


@pytest.mark.parametrize("first", range(0, 80, 20))
def test_the_even_split_counts_them_once_and_is_never_better(first: int, tmp_path: Path) -> None:
    seen = 0
    for seed, spec in sharing_specs(first, 20):
        result = trainopt.design(loaded(spec, tmp_path / str(seed)))
        even = result.even_split
        if result.objective is None or even is None or even.cost_parts is None or even.cost is None:
            continue
        bought = [(s.medium, s.module, s.count) for part in even.blocks for s in part.stages]
        value = even.cost if spec.objective == "cost" else even.area
        assert value is not None and value >= result.objective.value * (1.0 - 1e-9), seed
        for blocks in routes(spec):
            if list(picks_in(blocks)) == bought:
                picks = [p for one in blocks for p in one]
                without_hours = sum(p.cost for p in picks) - shared_saving(spec, picks)
                assert even.cost - even.cost_parts.hours == pytest.approx(without_hours, rel=1e-9), seed
                seen += 1
                break
        rows = math.fsum(one.holders_cost or 0.0 for part in even.blocks for one in part.stages)
        assert rows == pytest.approx(even.cost_parts.holders, abs=1e-9), seed
    assert seen > 3


def test_bounds_are_below_every_design_and_pruning_changes_nothing(tmp_path: Path) -> None:
    checked = 0
    for seed, spec in sharing_specs(200, 40):
        full = prepare(loaded(spec, tmp_path / str(seed))).problem
        pruned, whole = best_route(prune(full)), best_route(full)
        assert pruned.objective == pytest.approx(whole.objective, rel=1e-9), seed
        if whole.route is None:
            continue
        index = index_problem(full)
        found = bounds(index)
        value, first = first_design(index, found)
        if first is not None:
            times = block_times(full, first)
            assert times is not None
            assert value == pytest.approx(objective_of(full, first, times), rel=1e-12)
            assert value >= whole.objective * (1.0 - 1e-9)
        least = dict.fromkeys(index.names, math.inf)
        for names, route in every_route(full):
            times = block_times(full, route)
            for name in names if times is not None else ():
                least[name] = min(least[name], objective_of(full, route, times or ()))
        for name, bound in zip(index.names, found.option.tolist(), strict=True):
            assert bound <= least[name] + 1e-7 * max(1.0, abs(bound)), (seed, name)
            checked += math.isfinite(least[name])
    assert checked > 100


def every_route(p: DesignProblem) -> Iterator[tuple[list[tuple[str, str, str, int]], Route]]:
    """Every allowed pick of a problem with the names of its options."""
    from factory import combinations

    for combination in combinations(p):
        names, route = [], []
        for part, picks in zip(p.blocks, combination, strict=True):
            owners = {id(c): s for s in part.stages for c in s.candidates}
            route.append(tuple(Choice(owners[id(c)], c, k) for c, k in picks))
            names += [(owners[id(c)].name, c.medium, c.options.module[k], int(c.options.count[k])) for c, k in picks]
        yield names, tuple(route)


def test_time_of_the_independent_side_is_the_package_s(tmp_path: Path) -> None:
    """Costs above compare like with like only if hours do: the times of a pick agree."""
    spec = replace(sharing_spec(1), objective="cost")
    result = trainopt.design(loaded(spec, tmp_path))
    for blocks in routes(spec):
        if picks_in(blocks) == named(result) and math.isfinite(value_of_picks(spec, blocks)) and spec.hour > 0.0:
            least = [least_time(spec, part, picks) for part, picks in zip(spec.blocks, blocks, strict=True)]
            assert [b.time for b in result.blocks] == pytest.approx(least, rel=1e-9)


# --- by hand ---


def two_stage_case(folder: Path, owned: int, objective: str = "cost") -> Case:
    """Two stages of the same kind of module, 4 racks of 2 slots each at 1000 a batch; media that do not foul.

    Σ R·V/A ≤ P·t with R = 0.02 bar/LMH, V = 1000 L, P = 2 bar, t = 5.05 h: 1/A1 + 1/A2 ≤ 0.505 per m². Of modules of
    0.5 m², 8 at most in each stage, 8 and 8 are enough (0.5) and 8 and 7 are not (0.536).
    """
    flat = {"law": "cake", "parameters": [0.02, 1e-12], "tested": 2000.0, "flux": 200.0, "lots": {}, "limit": None,
            "dp": None, "inlet": None, "scale_up": 1.0, "flush": None}  # fmt: skip
    spec = Spec(
        media={"oats": flat, "rye": flat},
        modules={name: {"medium": medium, "area": 0.5, "price": 10.0, "hold_up": 0.0, "max_count": 8}
                 for name, medium in (("oats-05", "oats"), ("rye-05", "rye"))},
        holders={"rack": {"modules": ["oats-05", "rye-05"], "slots": 2, "price": 5000.0, "batches": 5, "owned": owned}},
        blocks=[{
            "block": "b", "pressure": 2.0, "static": 0.0, "line": 0.0, "setup": 0.0, "operation": "constant-flow",
            "pump": None, "stages": [
                {"stage": "first", "media": [("oats", None)], "optional": False},
                {"stage": "second", "media": [("rye", None)], "optional": False},
            ],
        }],
        volume=1000.0, time=5.05, safety_factor=1.0, objective=objective, basis="pooled", schedule="sequential",
    )  # fmt: skip
    return loaded(spec, folder)


@pytest.mark.parametrize("objective", ["cost", "area"])
@pytest.mark.parametrize(
    ("owned", "first", "second"),
    [(0, 4000.0, 4000.0), (2, 2000.0, 4000.0), (5, 0.0, 3000.0), (8, 0.0, 0.0), (9, 0.0, 0.0)],
)
def test_two_stages_do_not_both_get_the_same_racks(
    owned: int, first: float, second: float, objective: str, tmp_path: Path
) -> None:
    # Each stage alone would have had the two for free, and the train been said to cost 2000 less.
    result = trainopt.design(two_stage_case(tmp_path, owned, objective))
    assert [p.count for p in result.picks] == [8, 8]
    assert result.cost_parts is not None and result.even_split is not None
    assert [one.holders_cost for one in result.blocks[0].stages] == pytest.approx([first, second])
    assert [one.holders for one in result.blocks[0].stages] == [{"rack": 4}, {"rack": 4}]
    assert result.cost_parts.holders == pytest.approx(first + second)
    assert result.cost == pytest.approx(160.0 + first + second)
    assert result.objective is not None
    assert result.objective.value == pytest.approx(8.0 if objective == "area" else 160.0 + first + second)
    assert result.even_split.cost == pytest.approx(result.cost)


def test_holders_of_one_stage_alone_are_deducted_there(tmp_path: Path) -> None:
    case = two_stage_case(tmp_path, 2)
    catalog = case.workspace.catalog
    alone = catalog.holders["rack"].model_copy(update={"modules": ("oats-05",)})
    narrow = catalog.model_copy(update={"holders": {"rack": alone}})
    problem_ = prepare(replace(case, workspace=replace(case.workspace, catalog=narrow))).problem
    assert problem_.owned == ()
    options = problem_.blocks[0].stages[0].candidates[0].options
    assert options.holders_cost.tolist() == [max(math.ceil(n / 2) - 2, 0) * 1000.0 for n in range(1, 9)]
    shared = prepare(case).problem
    assert shared.owned == (OwnedHolder("rack", 2, 1000.0),)
    assert shared.blocks[0].stages[0].candidates[0].options.holders_cost[-1] == 4000.0


def table(rows: list[tuple[str, float, float, tuple[str, int] | None]]) -> Options:
    """Options of (module, area, full cost, holders)."""
    zero, cost = np.zeros(len(rows)), np.array([row[2] for row in rows])
    return Options(
        tuple(row[0] for row in rows), np.ones(len(rows), dtype=np.int64), tuple(row[3] for row in rows),
        np.array([row[1] for row in rows]), cost, zero, zero, zero, cost, zero, zero, np.zeros((1, len(rows))),
    )  # fmt: skip


def test_an_option_that_owned_holders_might_make_cheaper_is_kept() -> None:
    # b is larger and 50 cheaper than a at full prices, but a rack of 100 may be free.
    options = table([("a", 2.0, 300.0, ("rack", 1)), ("b", 3.0, 250.0, None), ("c", 1.0, 450.0, ("rack", 4))])
    assert undominated(options).tolist() == [1]
    one = (OwnedHolder("rack", 1, 100.0),)
    assert undominated(options, one, "cost").tolist() == [0, 1]
    assert undominated(options, (OwnedHolder("rack", 3, 100.0),), "cost").tolist() == [2, 0, 1]
    assert undominated(options, (OwnedHolder("rack", 2, 100.0),), "cost").tolist() == [0, 1]
    # What does not count in the objective does not keep it.
    by_area = replace(options, weight=options.area)
    assert undominated(by_area, one, "area").tolist() == undominated(by_area).tolist() == [2, 0, 1]


def test_the_staircase_says_that_it_does_not_serve() -> None:
    p = problem(block("b", stage("s", Medium("u", "cake", (1e-3, 1e-3)))), objective="cost")
    with pytest.raises(ValueError, match="share"):
        staircase(replace(p, owned=(OwnedHolder("rack", 1, 100.0),)))
