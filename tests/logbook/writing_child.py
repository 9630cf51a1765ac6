"""A process that records until it is killed: 200 readings a second, each number it may promise
is printed. ``python -m tests.logbook.writing_child FILE``.
"""

from __future__ import annotations

import itertools
import sys
import time
from pathlib import Path

from readout.logbook import Logbook
from tests.logbook.made import new_run, reading

EVERY_S = 1 / 200


def main(path: Path) -> None:
    with Logbook(path) as log:
        run_id = log.start(new_run())
        begin_s = time.monotonic()
        told = None
        for seq in itertools.count():
            log.append(reading(seq), t_s=seq * EVERY_S)
            if log.committed_seq != told:
                told = log.committed_seq
                print(run_id, told, flush=True)
            time.sleep(max(0.0, begin_s + (seq + 1) * EVERY_S - time.monotonic()))


if __name__ == "__main__":
    main(Path(sys.argv[1]))
