"""A design follows from what the files say: neither from their order, nor from the solver's seed or threads."""

from __future__ import annotations

import re
import shutil
from collections.abc import Callable
from pathlib import Path
from random import Random
from typing import Any

import pytest
import yaml
from factory import block, combinations, flat, problem, stage, values
from independent import Spec, write
from workspaces import alike_workspace, random_workspace

import trainopt
from trainopt.optimize.index import index_problem
from trainopt.optimize.search import Found, SolverOptions, best_route, fixed_order
from trainopt.train.build import prune
from trainopt.train.problem import DesignProblem

ROOT = Path(__file__).parents[2]
ORDERED = {"blocks", "stages", "count", "coefficients"}
"""Lists whose order says something: the flow, a range, the powers of a polynomial."""
RUNS = [*((seed, 1) for seed in range(5)), (0, 2), (3, 2)]
"""Seeds and threads."""


def document(path: Path, solver: SolverOptions | None = None, **asked: Any) -> dict[str, Any]:
    """A design's JSON, less what names the files' bytes, their lines, and how the solver was run."""
    found = trainopt.design_document(trainopt.design(trainopt.load_case(path), solver=solver, **asked))
    for key in ("inputs", "solver"):
        found.pop(key, None)
    for warning in found["warnings"]:
        warning["text"] = re.sub(r"\.yaml:\d+:", ".yaml:", warning["text"])
    return found


def shuffled(data: Any, r: Random, key: str = "") -> Any:
    """The same with the entries of every mapping, and of every list whose order says nothing, in another order."""
    if isinstance(data, dict):
        return {k: shuffled(v, r, k) for k, v in r.sample(list(data.items()), len(data))}
    if isinstance(data, list):
        inside = [shuffled(part, r) for part in data]
        return inside if key in ORDERED else r.sample(inside, len(inside))
    return data


def shuffle_files(folder: Path, seed: int) -> None:
    """Write every YAML file below a folder anew, its entries in another order."""
    r = Random(seed)
    for path in sorted(folder.rglob("*.yaml")):
        data = yaml.safe_load(path.read_text(encoding="utf-8"))
        path.write_text(yaml.safe_dump(shuffled(data, r), sort_keys=False), encoding="utf-8")


@pytest.mark.parametrize("make", [random_workspace, alike_workspace])
def test_the_order_of_entries_changes_nothing(make: Callable[[int], Spec], tmp_path: Path) -> None:
    for seed in range(600, 620):
        path = write(make(seed), tmp_path / str(seed))
        before = document(path, parts=True, routes=True, alternatives=3)
        shuffle_files(tmp_path / str(seed), seed)
        assert document(path, parts=True, routes=True, alternatives=3) == before, seed


@pytest.mark.parametrize("basis", ["worst-lot", {"reliability": 0.9, "samples": 40, "seed": 1}])
def test_the_order_of_bench_runs_and_lots_changes_nothing(basis: Any, tmp_path: Path) -> None:
    for part in ("models", "scenarios"):
        shutil.copytree(ROOT / part, tmp_path / part)
    path = tmp_path / "scenarios" / "harvest.yaml"
    scenario = yaml.safe_load(path.read_text(encoding="utf-8"))
    path.write_text(yaml.safe_dump({**scenario, "basis": basis}), encoding="utf-8")
    before = document(path)
    for seed in range(3):
        shuffle_files(tmp_path, seed)
        assert document(path) == before, seed


@pytest.mark.parametrize("make", [random_workspace, alike_workspace])
def test_seeds_and_threads_of_the_solver_change_nothing(make: Callable[[int], Spec], tmp_path: Path) -> None:
    for seed in range(700, 706):
        path = write(make(seed), tmp_path / str(seed))
        first, *others = (
            document(path, SolverOptions(seed=s, threads=t), routes=True, alternatives=3) for s, t in RUNS
        )
        assert all(other == first for other in others), seed


def train_of_equal_sums(seed: int, most: int = 5) -> DesignProblem:
    """Stages that do not foul, module by module of 1 m², in which designs tie by their sums and no options do.

    R_i is as n_i·(n_i + 1): from n_i to n_i + 1 modules every stage gives up the same pressure × time. The time is
    such that some of the stages, any of them, need the larger number.
    """
    r = Random(seed)
    steps = r.sample(range(1, 10), r.randint(2, most))
    larger = r.randint(1, len(steps) - 1)
    stages = [
        stage(f"s{k}", flat(f"m{k}", n * (n + 1) * 1e-3, sizes=(("x", 1.0, 100.0, 15),))) for k, n in enumerate(steps)
    ]
    spent = float(sum(n + 1 for n in steps) - larger)  # bar·h for 1000 L
    objective = r.choice(["area", "cost"])
    return problem(block("b", *stages, pressure=2.0), volume=1000.0, time=spent / 2.0, objective=objective)


def names(found: Found) -> list[tuple[str, int]]:
    assert found.route is not None
    return [(c.stage.name, int(c.candidate.options.count[c.option])) for one in found.route for c in one]


def test_designs_that_tie_by_their_sums_are_told_apart_alike_by_every_seed() -> None:
    for seed in range(40):
        train = prune(train_of_equal_sums(seed))
        first, *others = (names(best_route(train, SolverOptions(seed=s, threads=t))) for s, t in RUNS)
        assert all(other == first for other in others), seed


def test_of_designs_that_tie_by_their_sums_the_first_in_a_fixed_order_is_taken() -> None:
    tied = 0
    for seed in range(20):
        train = prune(train_of_equal_sums(seed, most=3))
        index = index_problem(train)
        order = dict(zip(index.names, fixed_order(index).tolist(), strict=True))
        able = [(values(train, one), one) for one in combinations(train)]
        able = [(value, one) for value, one in able if value[1] <= train.time * (1.0 + 1e-9)]
        least = min(value[0] for value, _ in able)
        # Equal in the objective, and in the time that the pressure spent takes, which is all that is spent here.
        spent = min(value[1] for value, _ in able if value[0] <= least * (1.0 + 1e-9))
        best = [one for value, one in able if value[0] <= least * (1.0 + 1e-9) and value[1] <= spent * (1.0 + 1e-9)]
        tied += len(best) > 1
        picks = [
            [(s.name, c.medium, c.options.module[k], int(c.options.count[k])) for s, (c, k)
             in zip(train.blocks[0].stages, one[0], strict=True)]
            for one in best
        ]  # fmt: skip
        first = min(picks, key=lambda pick: sum(order[name] for name in pick))
        assert names(best_route(train)) == [(name[0], name[3]) for name in first], seed
    assert tied == 20
