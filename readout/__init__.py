"""readout: the electronic readout of an autocollimator.

Pictures beyond ``LARGEST_PICTURE_PX`` are refused by their header: a small file can claim to be so
large that decoding it takes all memory. OpenCV reads the limit once, when it is first imported,
so it is set here, before anything; a limit the user set stands.
"""

import os

LARGEST_PICTURE_PX = 160_000_000  # above the largest sensors in use, 150 million pixels

os.environ.setdefault("OPENCV_IO_MAX_IMAGE_PIXELS", str(LARGEST_PICTURE_PX))

__version__ = "0.1.0"
