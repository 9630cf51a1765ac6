"""What the user chose, kept in ``settings.json``.

Keys this version does not know are kept as they are: another version may have written them.
"""

from __future__ import annotations

import json
import threading
from pathlib import Path
from typing import Annotated, Any, Literal

from platformdirs import user_config_path
from pydantic import BaseModel, ConfigDict, Field, ValidationError, field_validator

from readout.angle import Mounting
from readout.angle.budget_conditions import parse_conditions
from readout.capture.source_name import source_name
from readout.errors import BadInput
from readout.files.atomic import write_text_whole
from readout.files.json_text import read_json, refuse_odd
from readout.instrument import Optics, Statistic
from readout.model import Target
from readout.units import Unit

SCHEMA = "readout.settings/1"
LARGEST_CHARACTERS = 100_000

HALF_TURN_ARCSEC = 648_000.0

# A number is a number: true and "1" are none.
Angle = Annotated[float, Field(strict=True, ge=-HALF_TURN_ARCSEC, le=HALF_TURN_ARCSEC)]


class _Model(BaseModel):
    model_config = ConfigDict(extra="allow", allow_inf_nan=False, frozen=True)


class Goal(_Model):
    """The angle a technician wants."""

    x_arcsec: Angle | None = None
    y_arcsec: Angle | None = None


class OpticsSettings(_Model):
    """Data of the parts, for a nominal calibration."""

    focal_length_mm: Annotated[float, Field(strict=True, ge=1, le=100_000)] | None = None
    pitch_um: Annotated[float, Field(strict=True, ge=0.1, le=1000)] | None = None
    mounting: Mounting = Mounting.STRAIGHT

    @property
    def optics(self) -> Optics | None:
        """None until both numbers are known."""
        if self.focal_length_mm is None or self.pitch_um is None:
            return None
        return Optics(self.focal_length_mm, self.pitch_um, self.mounting)


class Settings(_Model):
    """All settings; each has a default."""

    schema_: Literal["readout.settings/1"] = Field(default="readout.settings/1", alias="schema")
    unit: Unit = Unit.ARCSEC
    theme: Literal["auto", "day", "night"] = "auto"
    target: Target = Target.CROSSHAIR
    source: Annotated[str, Field(min_length=1)] | None = None
    calibration: Annotated[str, Field(min_length=1)] | None = None
    average_s: Annotated[float, Field(strict=True, gt=0, le=60)] = 1.0
    statistic: Statistic = Statistic.MEAN
    goal: Goal = Goal()
    tolerance_arcsec: Annotated[Angle, Field(gt=0)] | None = None
    optics: OpticsSettings = OpticsSettings()
    conditions: dict[str, Any] = Field(default_factory=dict)

    @field_validator("conditions")
    @classmethod
    def _known_conditions(cls, value: dict[str, Any]) -> dict[str, Any]:
        """What the budget cannot read is refused when it is given, not when it is needed."""
        try:
            parse_conditions(value)
        except BadInput as error:
            raise ValueError(str(error)) from error
        return value

    def document(self) -> dict[str, Any]:
        """The settings as JSON holds them."""
        return self.model_dump(mode="json", by_alias=True)

    def shown(self) -> dict[str, Any]:
        """The settings as people and pages may see them: the source without its password."""
        return self.document() | {"source": self.source and source_name(self.source)}


def default_settings_path() -> Path:
    """The file in the folder the platform gives to settings."""
    return user_config_path("readout", appauthor=False) / "settings.json"


class SettingsStore:
    """The settings and their file, which is written only when something is changed.

    Raises BadInput if the file is there and broken; it is never overwritten then.
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        self._lock = threading.Lock()
        self._current = _load(path)

    @property
    def current(self) -> Settings:
        return self._current

    def merged(self, changes: dict[str, Any]) -> Settings:
        """The settings with ``changes`` in them, objects merged, nothing kept yet.

        Raises BadInput for a value that cannot be.
        """
        try:
            refuse_odd(changes)
        except ValueError as error:
            raise BadInput(f"{error}: correct it") from error
        merged = _merge(self._current.document(), changes)
        if len(json.dumps(merged)) > LARGEST_CHARACTERS:
            raise BadInput("these would be more settings than can be kept: give fewer or shorter")
        return _checked(merged, "")

    def keep(self, settings: Settings) -> None:
        """Make ``settings`` the current ones and write them. Raises BadInput if that fails."""
        with self._lock:
            text = json.dumps(settings.document(), indent=2, ensure_ascii=False, allow_nan=False)
            write_text_whole(self.path, text + "\n")
            self._current = settings


def _load(path: Path) -> Settings:
    try:
        document = read_json(path.read_bytes())
    except FileNotFoundError:
        return Settings()
    except OSError as error:
        raise BadInput(f"settings file {path} cannot be read ({error.strerror})") from error
    except ValueError as error:
        raise BadInput(
            f"settings file {path} is broken ({error}): correct it, or move it away to start anew"
        ) from error
    if not isinstance(document, dict) or document.get("schema") != SCHEMA:
        raise BadInput(
            f"settings file {path} is not of the schema {SCHEMA!r}: "
            "give another by --settings, or move it away to start anew"
        )
    return _checked(document, f"settings file {path}: ")


def _checked(document: dict[str, Any], where: str) -> Settings:
    try:
        return Settings.model_validate(document)
    except ValidationError as error:
        fault = error.errors()[0]
        name = ".".join(str(part) for part in fault["loc"])
        message = fault["msg"][0].lower() + fault["msg"][1:]
        raise BadInput(f"{where}{name}: {message}") from error


def _merge(old: dict[str, Any], changes: dict[str, Any]) -> dict[str, Any]:
    merged = dict(old)
    for key, value in changes.items():
        before = merged.get(key)
        if isinstance(before, dict) and isinstance(value, dict):
            merged[key] = _merge(before, value)
        else:
            merged[key] = value
    return merged
