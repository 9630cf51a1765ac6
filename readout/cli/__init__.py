"""The commands: thin, each importing what it needs, so that help comes at once.

Linear algebra gets one thread. The systems solved for a frame are small: more threads make none
of them faster, and waiting for work they take three times the processor's time of the measuring.
The libraries read the setting once, when numpy is imported; one the user made stands.
"""

import os

for _name in ("OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "VECLIB_MAXIMUM_THREADS"):
    os.environ.setdefault(_name, "1")

from readout.cli.app import main  # noqa: E402 (the setting comes first: see above)

__all__ = ["main"]
