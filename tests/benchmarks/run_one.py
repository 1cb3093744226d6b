"""One bounded search in a process of its own: prints its time, answer and peak memory as JSON.

python tests/benchmarks/run_one.py PARTS GROUPS SEED AIM WORKERS
"""

from __future__ import annotations

import json
import resource
import sys
import time

from detune.proof.instances import InstanceSettings, make_instance
from detune.proof.search import SearchSettings
from detune.proof.search_front import search_front, search_least_cost


def main(parts: int, groups: int, seed: int, aim: str, workers: int) -> None:
    started = time.perf_counter()
    warm = make_instance(InstanceSettings(parts=20, groups=groups, seed=1))
    search_front(warm, settings=SearchSettings(kernels="compiled", workers=1))
    loaded = time.perf_counter() - started
    selection = make_instance(InstanceSettings(parts=parts, groups=groups, seed=seed))
    ask = search_least_cost if aim == "least cost" else search_front
    settings = SearchSettings(kernels="compiled", workers=workers)
    started, used = time.perf_counter(), time.process_time()
    result = ask(selection, settings=settings)
    seconds, used = time.perf_counter() - started, time.process_time() - used
    print(
        json.dumps(
            {
                "parts": parts,
                "groups": groups,
                "seed": seed,
                "aim": aim,
                "workers": workers,
                "designs": float(result.design_count),
                "seconds": seconds,
                "processor_seconds": used,
                "status": result.status,
                "cost": result.designs[0].cost if result.designs else None,
                "points": len(result.designs),
                "counts": {rule: float(count) for rule, count in result.counts.items()},
                "accounted": sum(result.counts.values()) == result.design_count,
                "loading_kernels_seconds": loaded,
                "peak_memory_mib": resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0,
            }
        )
    )


if __name__ == "__main__":
    main(int(sys.argv[1]), int(sys.argv[2]), int(sys.argv[3]), sys.argv[4], int(sys.argv[5]))
