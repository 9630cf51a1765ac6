"""The floor of an instrument, kept as a JSON file."""

from __future__ import annotations

import json
from pathlib import Path

from readout.errors import BadInput
from readout.files.atomic import write_text_whole
from readout.files.json_text import read_json
from readout.stability import Floor, floor_document, floor_of_document


def save_floor(path: Path, floor: Floor) -> None:
    """Write ``floor`` to ``path``, replacing the file whole. Raises BadInput if it cannot."""
    write_text_whole(path, json.dumps(floor_document(floor), indent=2, allow_nan=False) + "\n")


def load_floor(path: Path) -> Floor:
    """The floor in the file at ``path``. Raises BadInput, one line, for one that holds none."""
    try:
        return floor_of_document(read_json(path.read_bytes()))
    except FileNotFoundError:
        raise BadInput(f"floor file {path} does not exist: check the name") from None
    except OSError as error:
        raise BadInput(f"cannot read floor file {path} ({error.strerror})") from error
    except (ValueError, BadInput) as error:
        raise BadInput(f"floor file {path} cannot be used: {error}") from error
