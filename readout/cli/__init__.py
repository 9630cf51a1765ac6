"""The commands: thin, each importing what it needs, so that help comes at once.

Linear algebra gets one thread. The systems solved for a frame are small: more threads make none
of them faster, and waiting for work they take three times the processor's time of the measuring.
The libraries read the setting once, when numpy is imported; one the user made stands.
"""

import os
import signal
import sys

for _name in ("OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "VECLIB_MAXIMUM_THREADS"):
    os.environ.setdefault(_name, "1")


def main() -> None:
    """The command line: see `readout.cli.app`, which takes a while to be imported."""
    if sys.argv[1:2] == ["live"]:  # what a signal ends is done, also before it has begun
        for number in (signal.SIGINT, signal.SIGTERM):
            signal.signal(number, lambda *_: sys.exit(0))
    from readout.cli import app

    app.main()


__all__ = ["main"]
