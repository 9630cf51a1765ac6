"""Single pictures, decoded to luminance and encoded: the one place that does either.

Pixels are never resized, turned (a camera's note on orientation is ignored) or rescaled. Colour
becomes luminance, 0.299 R + 0.587 G + 0.114 B (ITU-R BT.601); of a JPEG its own Y is taken.

The full scale is what a file says, never guessed from the brightest pixel, which would change
from frame to frame: ``maxval`` of a PGM, ``sBIT`` of a PNG (whose samples are then shifted down
to their own bits), else the largest number of the container, 255 or 65535. A 12-bit picture that
somebody stored without a word in 16 bits therefore has a full scale of 65535, and its
saturation shows only as a plateau.
"""

from __future__ import annotations

import re
from pathlib import Path

import cv2
import numpy as np

from readout.errors import BadInput, cannot_write
from readout.files import png
from readout.model import Pixels

PICTURE_SUFFIXES = (".png", ".tif", ".tiff", ".jpg", ".jpeg", ".bmp", ".pgm")

_JPEG_START = b"\xff\xd8"
_KINDS = (
    png.SIGNATURE,
    _JPEG_START,
    b"BM",
    b"II*\0",
    b"MM\0*",
    b"II+\0",
    b"MM\0+",
    b"P2",
    b"P5",
)
_NOT_ONE = "is no picture readout can read: give PNG, TIFF, JPEG, BMP or PGM, 8 or 16 bit"

# Refusals reach people as one line of ours; the decoder's own lines would stand between them.
cv2.utils.logging.setLogLevel(cv2.utils.logging.LOG_LEVEL_SILENT)


def read_picture(path: Path) -> tuple[Pixels, int]:
    """Luminance, shape (height, width), and full scale of a picture file.

    Raises BadInput, naming the file, if it is missing, a folder, empty, damaged or no picture.
    """
    path = Path(path)
    if path.exists() and not (path.is_file() or path.is_dir()):  # a pipe or device may never end
        raise BadInput(f"{path} is no regular file: give a picture file")
    try:
        data = path.read_bytes()
    except FileNotFoundError:
        raise BadInput(f"{path} does not exist: check the name") from None
    except IsADirectoryError:
        raise BadInput(f"{path} is a folder: give a picture in it") from None
    except OSError as error:
        if path.is_dir():  # as some systems report it
            raise BadInput(f"{path} is a folder: give a picture in it") from error
        raise BadInput(
            f"{path} cannot be read ({error.strerror}): check its permissions"
        ) from error
    return decode_picture(data, name=str(path))


def decode_picture(data: bytes, *, name: str = "the picture") -> tuple[Pixels, int]:
    """Luminance, shape (height, width), and full scale of an encoded picture.

    Raises BadInput, beginning with ``name``, if it is empty, damaged or no picture.
    """
    if not data:
        raise BadInput(f"{name} is empty: save it again")
    if not data.startswith(_KINDS):
        raise BadInput(f"{name} {_NOT_ONE}")
    bits = None
    if data.startswith(png.SIGNATURE):
        try:
            bits = png.check(data)
        except ValueError as error:
            raise BadInput(f"{name} is damaged ({error}): save it again") from None
    decoded = _decoded(data, name)
    if decoded is None:
        raise BadInput(f"{name} is damaged or cut short: save it again")
    if decoded.dtype not in (np.uint8, np.uint16):
        raise BadInput(f"{name} has {decoded.dtype} samples: save it with 8 or 16 bits, unsigned")
    pixels = luminance(decoded)
    depth = 8 * pixels.dtype.itemsize
    if bits is not None and 0 < bits < depth:
        return np.right_shift(pixels, depth - bits), 2**bits - 1
    if data.startswith((b"P2", b"P5")) and (pixels.dtype == np.uint16 or data[:2] == b"P5"):
        return pixels, _pgm_maxval(
            data, name
        )  # 8-bit text alone is stretched to 255 by the decoder
    return pixels, 2**depth - 1


def decode_jpeg(data: bytes) -> tuple[Pixels, int]:
    """As `decode_picture`, of what can only be a JPEG: a picture of a motion JPEG stream."""
    if not data.startswith(_JPEG_START):
        raise BadInput("the picture is no JPEG: choose a stream of motion JPEG")
    return decode_picture(data)


def _decoded(data: bytes, name: str) -> np.ndarray | None:
    """What OpenCV makes of the data, None if it makes nothing of it.

    Raises BadInput for a picture beyond the limit set in `readout`.
    """
    how = cv2.IMREAD_UNCHANGED
    if data.startswith(_JPEG_START):  # grey asks the JPEG for its Y: no colour round trip
        how = cv2.IMREAD_GRAYSCALE | cv2.IMREAD_IGNORE_ORIENTATION
    try:
        return cv2.imdecode(np.frombuffer(data, np.uint8), how)
    except cv2.error as error:
        if "MAX_IMAGE_PIXELS" in str(error):
            raise BadInput(
                f"{name} has more pixels than any camera: give a picture as the camera takes it"
            ) from error
        return None


def luminance(picture: np.ndarray) -> Pixels:
    """Grey, blue-green-red or blue-green-red-alpha samples as luminance, of the same type."""
    if picture.ndim == 2:
        grey = picture
    elif picture.shape[2] == 1:
        grey = picture[:, :, 0]
    else:
        code = cv2.COLOR_BGRA2GRAY if picture.shape[2] == 4 else cv2.COLOR_BGR2GRAY
        grey = cv2.cvtColor(picture, code)
    return np.ascontiguousarray(grey)


_PGM_HEAD = re.compile(rb"P[25]" + 3 * rb"(?:\s|#[^\r\n]*[\r\n])+(\d{1,9})")


def _pgm_maxval(data: bytes, name: str) -> int:
    """The fourth word of a PGM header, comments left out."""
    head = _PGM_HEAD.match(data)
    if head is None:
        raise BadInput(f"{name} has a damaged header: save it again")
    return int(head[3])


def write_picture(path: Path, pixels: Pixels, *, full_scale: int | None = None) -> None:
    """Write ``pixels`` in the format its name asks for; PNG and TIFF keep 16 bits.

    A PNG also keeps a ``full_scale`` of 2^n - 1 below that of the container (1023, 4095): it is
    read back as it was. Raises BadInput if the file cannot be written or its format cannot hold
    the depth. Raises ValueError if a pixel exceeds ``full_scale``.
    """
    if full_scale is not None and pixels.max(initial=0) > full_scale:
        raise ValueError(f"a pixel of {pixels.max()} is beyond the full scale, {full_scale}")
    path = Path(path)
    suffix = path.suffix.lower()
    if suffix not in PICTURE_SUFFIXES:
        raise BadInput(f"{path}: no such picture format; name it .png, .tif, .jpg, .bmp or .pgm")
    if pixels.dtype == np.uint16 and suffix in (".jpg", ".jpeg", ".bmp"):
        raise BadInput(f"{path}: this format holds 8 bits, the picture has 16; name it .png")
    depth = 8 * pixels.dtype.itemsize
    bits = depth if full_scale is None else full_scale.bit_length()
    keeps_bits = suffix == ".png" and full_scale == 2**bits - 1 and bits < depth
    data = _encoded(suffix, np.left_shift(pixels, depth - bits) if keeps_bits else pixels)
    try:
        path.write_bytes(png.with_significant_bits(data, bits) if keeps_bits else data)
    except OSError as error:
        raise cannot_write(path, error) from error


def encode_jpeg(pixels: Pixels, *, full_scale: int | None = None, quality: int = 90) -> bytes:
    """A JPEG to look at; more than 8 bits are brought to 8 by ``full_scale``."""
    if pixels.dtype != np.uint8:
        top = full_scale or np.iinfo(pixels.dtype).max
        shown = cv2.convertScaleAbs(pixels, alpha=255.0 / top)
        return _encoded(".jpg", shown, [cv2.IMWRITE_JPEG_QUALITY, quality])
    return _encoded(".jpg", pixels, [cv2.IMWRITE_JPEG_QUALITY, quality])


def _encoded(suffix: str, pixels: np.ndarray, options: list[int] | None = None) -> bytes:
    done, data = cv2.imencode(suffix, np.ascontiguousarray(pixels), options or [])
    if not done:
        raise BadInput(f"a picture of {pixels.shape} cannot be written as {suffix}: use .png")
    return data.tobytes()
