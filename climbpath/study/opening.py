"""Whether a way is open at all, and which one is the least bad by some value of its nodes."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from climbpath.route.bottleneck import bottleneck_route
from climbpath.route.demands import with_demands
from climbpath.route.shortest import Route, Sources
from climbpath.study.climb import Climb

Array = NDArray[np.float64]


def way_under(climb: Climb, value: Array | None = None) -> Route | None:
    """The route whose greatest node ``value`` (n,) is least, then quickest, in the graph's own
    numbers; the quickest where no value is given. None where there is no way.
    """
    if value is None:
        value = np.zeros(climb.search.graph.nodes)
    if not len(climb.sources) or not len(climb.targets):
        return None
    sources = Sources.at(climb.sources, climb.source_time)
    demanded = with_demands(climb.search.graph, climb.demands, sources, climb.targets,
                            climb.start_events)
    if not len(demanded.sources.nodes) or not len(demanded.targets):
        return None
    inner = value if demanded.graph is climb.search.graph else value[demanded.base_node]
    found = bottleneck_route(demanded.graph, inner, demanded.graph.time_us, demanded.sources,
                             demanded.targets)
    return None if found is None else demanded.base_route(found.route)
