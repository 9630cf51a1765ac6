"""Where the fixed frame of a camera is kept: a file for each camera, picture size and depth."""

from __future__ import annotations

import hashlib
import re
from dataclasses import dataclass
from pathlib import Path

from readout.errors import BadInput, ReadoutError
from readout.files.preparation_file import SUFFIX, CameraKnowledge, load_knowledge
from readout.instrument.preparing import Preparing

_USB = "usb:"


@dataclass(frozen=True, slots=True)
class KeptFor:
    """What is kept in ``folder`` for the camera ``source``; without it, what was ``given``.

    What is kept was made on what was given, and is found only together with the same again.
    """

    folder: Path
    source: str
    given: Preparing | None = None

    def known_for(self, size_px: tuple[int, int], full_scale: int) -> CameraKnowledge | None:
        """See `readout.instrument.preparing.Preparing`."""
        path = self.path_for(size_px, full_scale)
        if not path.exists():
            return self.base(size_px, full_scale)
        try:
            known = load_knowledge(path)
            known.refuse_unfit(size_px, full_scale)
        except BadInput as error:
            raise BadInput(f"{error}; or delete {path}, then take a fixed frame anew") from error
        return known

    def base(self, size_px: tuple[int, int], full_scale: int) -> CameraKnowledge | None:
        """What is known besides the fixed frame."""
        return None if self.given is None else self.given.known_for(size_px, full_scale)

    def path_for(self, size_px: tuple[int, int], full_scale: int) -> Path:
        """The file for pictures of this format; it may not be there."""
        base = self.base(size_px, full_scale)
        camera = _identity(self.source)
        whole = f"{camera}\n{base.made_utc if base else ''}"
        digest = hashlib.sha256(whole.encode()).hexdigest()[:8]
        plain = re.sub(r"[^A-Za-z0-9]+", "-", camera).strip("-")[-40:]
        width_px, height_px = size_px
        return self.folder / f"{plain}-{digest}-{width_px}x{height_px}-{full_scale}{SUFFIX}"


def _identity(source: str) -> str:
    """What names the camera itself, where an index names whatever was plugged in first."""
    if not source.startswith(_USB):
        return source
    from readout.capture.cameras import find_camera

    try:
        return _USB + find_camera(source.removeprefix(_USB)).identity
    except ReadoutError:  # it is gone at this moment
        return source
