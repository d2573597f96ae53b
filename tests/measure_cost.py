"""Runs one job in a process of its own and compares what it took with what was estimated.

    python measure_cost.py JOB.json PICTURES

Prints processor seconds and peak memory beyond the resting process, true and estimated, as JSON.
The job runs in a fork of a warm process, as in a work-horse: it copies the pages that it touches.
"""

import json
import os
import sys
import tempfile
import time
from pathlib import Path

from threadpoolctl import threadpool_limits

from workers import checking, pipeline
from workers.analysis.stopwatch import Stopwatch
from workers.document.read import read_document
from workers.understanding import look_over


def memory(key: str) -> int:
    """VmRSS: resident now, VmHWM: at most since the process began [bytes] (proc(5))."""
    lines = Path("/proc/self/status").read_text().splitlines()
    return next(1024 * int(line.split()[1]) for line in lines if line.startswith(key))


def main() -> None:
    document, pictures = Path(sys.argv[1]).read_bytes(), int(sys.argv[2])
    pipeline.warm_up()
    if child := os.fork():
        os._exit(os.waitstatus_to_exitcode(os.waitpid(child, 0)[1]))
    resting, start = memory("VmRSS"), time.process_time()
    with tempfile.TemporaryDirectory() as folder:
        pipeline.run(document, Path(folder), pictures=pictures)
    seconds, peak = time.process_time() - start, memory("VmHWM") - resting
    watch = Stopwatch()
    with threadpool_limits(1):
        with watch("reading"):
            job = read_document(document)
        with watch("meshing"):
            understood = look_over(job, pipeline.prepare(job))
        estimate = checking.cost(understood, watch, pictures)
    print(
        json.dumps(
            {
                "seconds": seconds,
                "estimated seconds": estimate.total_seconds,
                "memory": peak,
                "estimated memory": estimate.peak_memory,
            }
        )
    )


if __name__ == "__main__":
    main()
