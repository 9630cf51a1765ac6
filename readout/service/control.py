"""What settings and options mean for the instrument. Options of the command win."""

from __future__ import annotations

import threading
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from readout.angle import Calibration
from readout.capture.open import describe_source
from readout.capture.source_name import source_name
from readout.errors import BadInput
from readout.files.calibration_file import load_calibration
from readout.instrument import Instrument, Optics, State
from readout.instrument.kept_frame import KeptFor
from readout.instrument.preparing import Preparing
from readout.instrument.scale import refuse_unfit
from readout.model import Target
from readout.service.settings import Settings, SettingsStore

SIMULATED = "simulated"
FIXED_FRAMES = "fixed-frames"


@dataclass(frozen=True, slots=True)
class Options:
    """What the command line fixes for this session; None leaves it to the settings."""

    source: str | None = None
    target: Target | None = None
    calibration: Calibration | None = None
    preparing: Preparing | None = None


def kept_frames(store: SettingsStore, options: Options) -> Callable[[str], KeptFor]:
    """Where the fixed frame of a source is: beside the settings, on top of what was given."""
    folder = store.path.parent / FIXED_FRAMES
    return lambda source: KeptFor(folder, source_name(source), options.preparing)


class Control:
    """Starts the instrument as options and settings say, and lets settings change it."""

    def __init__(self, instrument: Instrument, store: SettingsStore, options: Options) -> None:
        self._instrument = instrument
        self._store = store
        self._options = options
        self._lock = threading.Lock()
        self._from_settings: Calibration | None = None

    def kept_for(self, source: str) -> KeptFor:
        """Where the fixed frame of ``source`` is kept."""
        return kept_frames(self._store, self._options)(source)

    @property
    def settings(self) -> Settings:
        return self._store.current

    @property
    def folder(self) -> Path:
        """Where the settings lie, and what is kept beside them."""
        return self._store.path.parent

    @property
    def source(self) -> str:
        """What is measured, as it was given."""
        return self._source(self._store.current)

    def start(self) -> None:
        """Begin to measure, in the acquisition's thread. Raises BadInput as `readout live` says."""
        settings = self._store.current
        self._from_settings = self._calibration_to_begin_with(settings)
        self._instrument.set_averaging(settings.average_s, settings.statistic)
        self._instrument.set_scale(self._scale(settings, self._from_settings))
        self._use(settings, patient=self._options.source is None)

    def change(self, changes: dict[str, Any]) -> Settings:
        """Merge ``changes`` into the settings, keep them, and act on them.

        Raises BadInput, and changes nothing, for a value that cannot be used.
        """
        with self._lock:
            before = self._store.current
            if before.source is not None and changes.get("source") == source_name(before.source):
                changes = changes | {"source": before.source}  # as it was shown: meant is the same
            after = self._store.merged(changes)
            if "source" in changes:
                describe_source(self._source(after))
            from_settings = self._from_settings
            if "calibration" in changes:  # read anew even if the name is the same
                from_settings = _calibration_named(after)
            scale = self._scale(after, from_settings)
            anew = self._has_to_open_anew(before, after, changes, scale)
            if not anew:
                self._refuse_unfit(scale, after)
            self._store.keep(after)
            self._from_settings = from_settings
            self._instrument.set_averaging(after.average_s, after.statistic)
            if anew:
                self._instrument.stop()
            self._instrument.set_scale(scale)
            if anew:
                self._use(after, patient=True)
        self._instrument.tell("settings", "the settings were changed")
        return after

    def use_calibration(self, path: Path) -> str:
        """Read with the calibration at ``path`` from now on; answers why not, "" if so."""
        if self._options.calibration is not None:
            return "the calibration given when readout was started counts, until it is started anew"
        try:
            self.change({"calibration": str(path)})
        except BadInput as error:
            return str(error)
        return ""

    def _calibration_to_begin_with(self, settings: Settings) -> Calibration | None:
        try:
            return _calibration_named(settings)
        except BadInput as error:
            if self._options.calibration is not None:  # which is used instead
                return None
            raise BadInput(
                f"{error}; it is named by the settings {self._store.path}: "
                "change them, or give --calibration"
            ) from error

    def _has_to_open_anew(
        self,
        before: Settings,
        after: Settings,
        changes: dict[str, Any],
        scale: Calibration | Optics | None,
    ) -> bool:
        """True for another source or target, and for another try after a failure or an end."""
        if self._source(before) != self._source(after):
            return True
        if self._target(before) is not self._target(after):
            return True
        match self._instrument.status().state:
            case State.FAILED:
                return "source" in changes or scale != self._instrument.scale
            case State.ENDED:
                return "source" in changes
            case _:
                return False

    def _refuse_unfit(self, scale: Calibration | Optics | None, settings: Settings) -> None:
        now = self._instrument.status()
        if not isinstance(scale, Calibration) or scale == self._instrument.scale:
            return
        if now.image_width_px is not None and now.image_height_px is not None:
            refuse_unfit(scale, now.image_width_px, now.image_height_px, self._target(settings))

    def _use(self, settings: Settings, *, patient: bool) -> None:
        self._instrument.use(
            self._source(settings), target=self._target(settings), patient=patient
        ).start()

    def _source(self, settings: Settings) -> str:
        return self._options.source or settings.source or SIMULATED

    def _target(self, settings: Settings) -> Target:
        return self._options.target or settings.target

    def _scale(
        self, settings: Settings, from_settings: Calibration | None
    ) -> Calibration | Optics | None:
        return self._options.calibration or from_settings or settings.optics.optics


def _calibration_named(settings: Settings) -> Calibration | None:
    return load_calibration(Path(settings.calibration)) if settings.calibration else None
