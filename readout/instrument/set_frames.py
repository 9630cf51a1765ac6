"""The frames of a calibration set, each read and sighted once."""

from __future__ import annotations

import hashlib

from readout.errors import BadInput
from readout.files.calibration_set import CalibrationSet
from readout.files.pictures import read_picture
from readout.model import Pixels, Sighting
from readout.sighting import locate
from readout.sighting.prepare import Preparation


class SetFrames:
    """The frames of a set: each read and sighted as it is asked for, all of one size."""

    def __init__(self, given: CalibrationSet) -> None:
        self._given = given
        self._sizes: dict[tuple[int, int], str] = {}
        self._known: dict[str, Sighting] = {}
        self.digest = hashlib.sha256()
        self._preparation = Preparation()
        if given.fixed is not None:
            fixed, _ = read_picture(given.folder / given.fixed)
            self.digest.update(fixed.tobytes())
            self._preparation = Preparation().with_fixed([fixed])

    @property
    def size(self) -> tuple[int, int]:
        """Width and height, px."""
        (size, _), *_ = self._sizes.items()
        return size

    def sighted(self, file: str) -> Sighting:
        """Raises BadInput for a frame that cannot be read, or is of another size."""
        if file in self._known:
            return self._known[file]
        pixels, full_scale = self.pixels(file)
        self._known[file] = locate(
            pixels,
            full_scale=full_scale,
            target=self._given.target,
            preparation=self._preparation,
        )
        return self._known[file]

    def pixels(self, file: str) -> tuple[Pixels, int]:
        """As they are, with the sensor's full scale; all frames must be of one size."""
        path = self._given.folder / file
        pixels, full_scale = read_picture(path)
        self.digest.update(path.read_bytes())
        self._sizes.setdefault((pixels.shape[1], pixels.shape[0]), file)
        if len(self._sizes) > 1:
            first, other = self._sizes.values()
            raise BadInput(
                f"{self._given.folder / first} and {other} are of different size: "
                "take all frames of a set with one"
            )
        return pixels, full_scale

    def good(self, file: str) -> Sighting:
        """As ``sighted``. Raises BadInput unless the target is there without a doubt."""
        sighting = self.sighted(file)
        if not sighting.found or sighting.quality:
            raise BadInput(
                f"{self._given.folder / file} shows no clear {self._given.target.value} "
                f"({words_of(sighting)}): take this frame again"
            )
        return sighting


def words_of(sighting: Sighting) -> str:
    """What is doubtful about it, for a person."""
    return " ".join(sighting.quality.words()).replace("_", " ") or "no image"
