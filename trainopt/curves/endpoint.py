"""Where the filtrate stops being clean enough: the loading at a turbidity limit, instantaneous or of the pool."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np

from trainopt.bench.quality import breakthrough
from trainopt.bench.run import Floats, ReducedRun


def turbidity_loading(runs: Iterable[ReducedRun], limit: float | None, pool_limit: float | None = None) -> float | None:
    """Smallest loading in L/m² over all runs where a limit is first reached or the filter breaks through.

    `limit` NTU holds for the filtrate as it leaves the filter, `pool_limit` NTU for the pooled filtrate so
    far. None where no limit is given or none is ever reached, and nothing breaks through.
    """
    found = [loading for run in runs for loading in _endpoints(run, limit, pool_limit)]
    return min(found, default=None)


def _endpoints(run: ReducedRun, limit: float | None, pool_limit: float | None) -> Iterable[float]:
    for values, most in ((run.turbidity, limit), (run.pool_turbidity, pool_limit)):
        if most is not None:
            crossed = crossing(run.loading, values, most)
            if crossed is not None:
                yield crossed
    first = breakthrough(run)
    if first is not None:
        yield float(run.loading[first])


def crossing(loading: Floats, turbidity: Floats, limit: float) -> float | None:
    """Loading at which the turbidity first reaches the limit, interpolated between the readings that have one."""
    read = np.flatnonzero(np.isfinite(turbidity) & (loading >= 0.0))
    over = read[turbidity[read] >= limit]
    if not len(over):
        return None
    first = int(over[0])
    before = read[read < first]
    if not len(before):
        return float(loading[first])
    last = int(before[-1])
    share = (limit - turbidity[last]) / (turbidity[first] - turbidity[last])
    return float(loading[last] + share * (loading[first] - loading[last]))
