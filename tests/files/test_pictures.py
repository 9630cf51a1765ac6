"""Pictures read and written, checked against Pillow, tifffile and files assembled by hand."""

from __future__ import annotations

import io
import struct
import zlib
from pathlib import Path

import numpy as np
import pytest
import tifffile
from PIL import Image

from readout.errors import BadInput
from readout.files.pictures import (
    decode_jpeg,
    decode_picture,
    encode_jpeg,
    read_picture,
    write_picture,
)

SHAPE = (48, 64)


def noise(kind: type, seed: int = 11, top: int | None = None) -> np.ndarray:
    top = top or np.iinfo(kind).max
    return np.random.default_rng(seed).integers(0, top, SHAPE, endpoint=True).astype(kind)


def pgm(pixels: np.ndarray, maxval: int) -> bytes:
    kind = ">u2" if maxval > 255 else "u1"
    head = f"P5\n# a comment\n{pixels.shape[1]} {pixels.shape[0]}\n{maxval}\n"
    return head.encode() + pixels.astype(kind).tobytes()


@pytest.mark.parametrize("suffix", [".png", ".tif", ".bmp", ".pgm"])
def test_eight_bits_come_back_as_written_and_as_pillow_sees_them(tmp_path: Path, suffix: str):
    pixels = noise(np.uint8)
    write_picture(tmp_path / f"a{suffix}", pixels)
    back, full_scale = read_picture(tmp_path / f"a{suffix}")
    np.testing.assert_array_equal(back, pixels)
    np.testing.assert_array_equal(np.array(Image.open(tmp_path / f"a{suffix}")), pixels)
    assert (back.dtype, full_scale) == (np.uint8, 255)


@pytest.mark.parametrize("suffix", [".png", ".tif", ".pgm"])
def test_sixteen_bits_come_back_as_written_and_as_pillow_sees_them(tmp_path: Path, suffix: str):
    pixels = noise(np.uint16)
    write_picture(tmp_path / f"a{suffix}", pixels)
    back, full_scale = read_picture(tmp_path / f"a{suffix}")
    np.testing.assert_array_equal(back, pixels)
    np.testing.assert_array_equal(np.array(Image.open(tmp_path / f"a{suffix}")), pixels)
    assert (back.dtype, full_scale) == (np.uint16, 65535)


def test_reads_what_tifffile_wrote(tmp_path: Path):
    pixels = noise(np.uint16)
    tifffile.imwrite(tmp_path / "a.tiff", pixels, byteorder=">")
    np.testing.assert_array_equal(read_picture(tmp_path / "a.tiff")[0], pixels)


@pytest.mark.parametrize("bits", [9, 10, 12, 14])
def test_png_keeps_its_significant_bits(tmp_path: Path, bits: int):
    top = 2**bits - 1
    pixels = noise(np.uint16, top=top)
    write_picture(tmp_path / "a.png", pixels, full_scale=top)
    back, full_scale = read_picture(tmp_path / "a.png")
    np.testing.assert_array_equal(back, pixels)
    assert full_scale == top
    # Another program sees the samples at the top of their 16 bits (PNG specification, 12.4).
    np.testing.assert_array_equal(np.array(Image.open(tmp_path / "a.png")), pixels << (16 - bits))


def test_significant_bits_of_a_file_assembled_by_hand():
    """Chunk by chunk after the PNG specification: IHDR, sBIT = 12, one stored row, IEND."""

    def chunk(kind: bytes, content: bytes) -> bytes:
        body = kind + content
        return struct.pack(">I", len(content)) + body + struct.pack(">I", zlib.crc32(body))

    row = b"\0" + np.array([0x0000, 0x0010, 0x3FF0, 0xFFF0], ">u2").tobytes()
    data = (
        b"\x89PNG\r\n\x1a\n"
        + chunk(b"IHDR", struct.pack(">IIBBBBB", 4, 1, 16, 0, 0, 0, 0))
        + chunk(b"sBIT", b"\x0c")
        + chunk(b"IDAT", zlib.compress(row))
        + chunk(b"IEND", b"")
    )
    pixels, full_scale = decode_picture(data)
    assert (pixels.tolist(), full_scale) == ([[0, 1, 1023, 4095]], 4095)


@pytest.mark.parametrize("maxval", [100, 255, 1023, 4095, 65535])
def test_full_scale_of_a_pgm_is_its_maxval(maxval: int):
    pixels = noise(np.uint16, top=maxval)
    back, full_scale = decode_picture(pgm(pixels, maxval))
    np.testing.assert_array_equal(back, pixels)
    assert full_scale == maxval


def test_full_scale_is_not_guessed_from_the_brightest_pixel(tmp_path: Path):
    for top in (900, 1023, 3000):
        write_picture(tmp_path / "a.png", noise(np.uint16, top=top))
        assert read_picture(tmp_path / "a.png")[1] == 65535


@pytest.mark.parametrize(
    ("colour", "luma"),
    # ITU-R BT.601: Y = 0.299 R + 0.587 G + 0.114 B
    [((255, 0, 0), 76), ((0, 255, 0), 150), ((0, 0, 255), 29), ((90, 90, 90), 90)],
)
@pytest.mark.parametrize("mode", ["RGB", "RGBA"])
def test_colour_becomes_luminance(colour: tuple[int, int, int], luma: int, mode: str):
    buffer = io.BytesIO()
    Image.new("RGB", (8, 6), colour).convert(mode).save(buffer, "png")
    pixels, full_scale = decode_picture(buffer.getvalue())
    assert pixels.shape == (6, 8)
    assert full_scale == 255
    assert np.all(pixels == luma)


def smooth_jpeg(**options: object) -> bytes:
    y, x = np.mgrid[0:48, 0:64]
    red, green = 120 + 60 * np.sin(x / 9), 120 + 60 * np.cos(y / 7)
    picture = Image.fromarray(np.stack([red, green, 0 * x + 90], -1).astype(np.uint8))
    buffer = io.BytesIO()
    picture.save(buffer, "jpeg", quality=90, **options)
    return buffer.getvalue()


def test_a_jpeg_gives_its_own_luminance():
    """Pillow's draft mode asks the same of the JPEG, through another build of the decoder."""
    data = smooth_jpeg()
    picture = Image.open(io.BytesIO(data))
    picture.draft("L", picture.size)
    pixels, _ = decode_picture(data)
    assert np.abs(pixels.astype(int) - np.array(picture).astype(int)).max() <= 1


def test_a_note_on_orientation_does_not_turn_the_picture():
    exif = Image.Exif()
    exif[0x0112] = 6  # "turn a quarter clockwise to view", Exif tag Orientation
    assert decode_picture(smooth_jpeg(exif=exif))[0].shape == (48, 64)


def broken_files(tmp_path: Path) -> dict[str, bytes]:
    """Files that are no sound picture; the names end up in the messages."""
    files = {"empty.png": b"", "text.png": b"hello, I am a text\n", "text.jpg": b"\xff\xd8 no"}
    for suffix, kind in ((".png", np.uint16), (".tif", np.uint8), (".bmp", np.uint8)):
        write_picture(tmp_path / f"whole{suffix}", noise(kind))
        files[f"half{suffix}"] = (tmp_path / f"whole{suffix}").read_bytes()[:1500]
    files["half.jpg"] = smooth_jpeg()[:-200]
    files["half.pgm"] = pgm(noise(np.uint8), 255)[:-1]
    whole = bytearray((tmp_path / "whole.png").read_bytes())
    whole[1500] ^= 0xFF
    files["flipped.png"] = bytes(whole)
    return files


def test_what_is_no_picture_gets_one_line_that_names_it(
    tmp_path: Path, capfd: pytest.CaptureFixture[str]
):
    files = broken_files(tmp_path)
    assert len(files) == 9
    for name, data in files.items():
        (tmp_path / name).write_bytes(data)
        with pytest.raises(BadInput) as caught:
            read_picture(tmp_path / name)
        assert str(tmp_path / name) in str(caught.value)
        assert "\n" not in str(caught.value)
    noise_of_decoders = capfd.readouterr().err
    assert "png" not in noise_of_decoders.lower()
    assert "opencv" not in noise_of_decoders.lower()


def test_missing_folder_and_float(tmp_path: Path):
    with pytest.raises(BadInput, match=r"nothere\.png does not exist"):
        read_picture(tmp_path / "nothere.png")
    with pytest.raises(BadInput, match="is a folder"):
        read_picture(tmp_path)
    tifffile.imwrite(tmp_path / "f.tif", np.ones(SHAPE, np.float32))
    with pytest.raises(BadInput, match="float32 samples: save it with 8 or 16 bits"):
        read_picture(tmp_path / "f.tif")


def test_writing_refuses_what_the_file_could_not_hold(tmp_path: Path):
    with pytest.raises(BadInput, match="holds 8 bits"):
        write_picture(tmp_path / "a.jpg", noise(np.uint16))
    with pytest.raises(BadInput, match="no such picture format"):
        write_picture(tmp_path / "a.xyz", noise(np.uint8))
    with pytest.raises(BadInput, match="cannot write"):
        write_picture(tmp_path / "none" / "a.png", noise(np.uint8))
    with pytest.raises(ValueError, match="beyond the full scale"):
        write_picture(tmp_path / "a.png", noise(np.uint16, top=2000), full_scale=1023)


def test_a_jpeg_to_look_at_uses_the_full_scale():
    twelve_bit = np.full(SHAPE, 2048, np.uint16)
    shown, _ = decode_picture(encode_jpeg(twelve_bit, full_scale=4095))
    assert np.all(np.abs(shown.astype(int) - 128) <= 1)  # 255 * 2048 / 4095 = 127.5
    shown, _ = decode_picture(encode_jpeg(np.full(SHAPE, 77, np.uint8)))
    assert np.all(np.abs(shown.astype(int) - 77) <= 1)


def test_a_long_comment_in_a_pgm_is_no_harm():
    pixels = noise(np.uint16, top=1000)
    head = b"P5 #" + b"x" * 5000 + b"\n64 # and\n#more\n48 1000\n"
    back, full_scale = decode_picture(head + pixels.astype(">u2").tobytes())
    np.testing.assert_array_equal(back, pixels)
    assert full_scale == 1000


def png_chunk(kind: bytes, body: bytes) -> bytes:
    return struct.pack(">I", len(body)) + kind + body + struct.pack(">I", zlib.crc32(kind + body))


def claims(width: int, height: int) -> dict[str, bytes]:
    """Small files whose headers claim to be that large (formats: PNG, PGM and BMP themselves)."""
    ihdr = struct.pack(">IIBBBBB", width, height, 8, 0, 0, 0, 0)
    png = b"\x89PNG\r\n\x1a\n" + png_chunk(b"IHDR", ihdr)
    png += png_chunk(b"IDAT", zlib.compress(b"\0" * 100_000)) + png_chunk(b"IEND", b"")
    info = struct.pack("<IiiHHIIiiII", 40, width, height, 1, 24, 0, 0, 0, 0, 0, 0)
    bmp = struct.pack("<2sIHHI", b"BM", 1000, 0, 0, 54) + info + b"\0" * 946
    return {"png": png, "pgm": b"P5 %d %d 255\n" % (width, height) + b"\0" * 1000, "bmp": bmp}


@pytest.mark.parametrize("kind", ["png", "pgm", "bmp"])
def test_a_small_file_that_claims_to_be_huge_is_refused_by_its_header(kind: str):
    with pytest.raises(BadInput, match="more pixels than any camera"):
        decode_picture(claims(30_000, 30_000)[kind])
    with pytest.raises(BadInput, match="damaged or cut short"):  # as large as a camera can be
        decode_picture(claims(14_000, 10_000)["bmp"])


def test_only_a_jpeg_passes_for_one():
    pixels = noise(np.uint8)
    assert decode_jpeg(encode_jpeg(pixels))[0].shape == SHAPE
    with pytest.raises(BadInput, match="no JPEG"):
        decode_jpeg(pgm(pixels, 255))
