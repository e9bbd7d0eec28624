"""The worst requests that a fuzz has found: what each takes now, in time of the processor and in memory.

What is allowed: 2 s on one core and 64 MiB for whatever the limits of a request allow. Printed, not
asserted; `tests/faults/fuzzing.py` holds requests over HTTP to both.
"""

from __future__ import annotations

import json
import os
import time

from service.documents.reading import read
from service.documents.recomputations import RecomputationRequest, answer
from service.documents.writing import to_bytes
from tests.documents.worst_requests import WORST
from tests.faults.watched_process import Watched

REPEATED = 3


def test_what_the_worst_requests_take_is_printed() -> None:
    own = Watched(os.getpid())
    print("\n     s   MiB  request")
    for worst in WORST:
        body = json.dumps(worst.document).encode()
        times, memory = [], []
        for _ in range(REPEATED):
            own.forget_peak()
            begun, before_mib = time.process_time(), own.resident_mib
            found = to_bytes(answer(read(RecomputationRequest, body)))
            times.append(time.process_time() - begun)
            memory.append(own.peak_mib - before_mib)
            assert json.loads(found)["verdict"] == worst.verdict
        print(f"{min(times):6.2f}  {max(memory):4.0f}  {worst.name}")
