"""docs/quality.md says every quality word with the limits that the code has."""

from __future__ import annotations

import inspect
import re
import string
from pathlib import Path
from types import SimpleNamespace

import pytest

from readout.capture.usb import UsbCamera
from readout.cli.say import quality_words
from readout.files.camera_frames import MOST_DEFECTIVE
from readout.instrument.fixed_frame import FRAMES
from readout.model import Quality
from readout.sighting import dark, lone_arm, reticle, spot, words

ROOT = Path(__file__).parent.parent
PAGE = (ROOT / "docs" / "quality.md").read_text("utf-8")
PREPARING = (ROOT / "docs" / "preparing.md").read_text("utf-8")

usb = SimpleNamespace(SETTLE_S=inspect.signature(UsbCamera.__init__).parameters["settle_s"].default)
MODULES = {"words": words, "lone_arm": lone_arm, "reticle": reticle, "spot": spot, "usb": usb}

SAID = {
    "no_image": [
        "explain {reticle.LEAST_EXPLAINED:g} of the light in its strip",
        "longer than {reticle.LEAST_LENGTH_WIDTHS:g} of its widths",
        "stand {reticle.LEAST_SDS:g} times above its own noise",
        "certain to {reticle.LARGEST_SD_PX:g} px; the two arms",
        "explain {spot.LEAST_EXPLAINED:g} of the structure",
        "stand {spot.LEAST_HEIGHT_SDS:g} times above its noise",
        "certain to {spot.LARGEST_SD_PX:g} px and wider than {spot.LEAST_WIDTH_PX:g} px",
    ],
    "one_axis": [
        "certain to {lone_arm.LARGEST_SD_PX:g} px",
        "{lone_arm.RANGE_LENGTHS:g} lengths in all",
    ],
    "several_returns": [
        "another return has more than {words.RIVAL_SHARE:g} of the main one's contrast",
        "could pull the main one by {words.HIDDEN_PX:g} px",
        "{words.FOUND_SHARE:g} of that arm's contrast would",
        "a line beside an arm has more than {words.RIVAL_SHARE:g} of its height",
        "differ in contrast by more than {words.UNLIKE_RATIO:g} times",
        "a shift of {words.LOPSIDED_PX:g} px would make them, or a third of that",
        "where they differ by {words.VERY_LOPSIDED:g} times",
        "hollow by {words.HOLLOW_SHARE:g} of its height",
        "higher than {words.RIVAL_SHARE:g} of it",
        "in place by {spot.LOPSIDED_PX:g} px and by {spot.LOPSIDED_SDS:g} standard deviations",
        "or by {spot.SURELY_LOPSIDED_SDS:g} whatever",
    ],
    "dim": [
        "lower than {words.DIM_CONTRAST:g} times the noise of one pixel",
        "less certain than {words.DIM_SD_PX:g} px",
    ],
    "saturated": ["more than {words.SATURATED_SHARE:g} of the pixels"],
    "blurred": ["more than {words.BLURRED_PX:g} px"],
    "astigmatic": ["by more than {words.ASTIGMATIC_RATIO:g} times"],
    "at_edge": ["nearer to the border than {words.AT_EDGE_WIDTHS:g} widths"],
    "vignetted": [],
    "damaged": [],
    "duplicate": [],
    "settling": ["for the first {usb.SETTLE_S:g} s"],
    "unlocked": [],
}
ALL_WORDS = (~Quality.OK).words()


def section(word: str) -> str:
    """What the page says under a word, on one line."""
    (text,) = re.findall(rf"^## {word}\n(.*?)(?=^## |\Z)", PAGE, re.DOTALL | re.MULTILINE)
    return " ".join(text.split())


def test_every_word_has_its_place_and_nothing_else_has_one() -> None:
    assert len(ALL_WORDS) == len(Quality)
    assert set(re.findall(r"^## (\w+)$", PAGE, re.MULTILINE)) == set(ALL_WORDS) == set(SAID)
    assert set(re.findall(r"^\| \[`(\w+)`\]\(#\1\)", PAGE, re.MULTILINE)) == set(ALL_WORDS)


@pytest.mark.parametrize("word", ALL_WORDS)
def test_limits_and_remedy_are_there(word: str) -> None:
    text = section(word)
    for said in SAID[word]:
        assert said.format(**MODULES) in text
    assert "**Do**: " in text


def test_no_limit_of_the_code_is_missing() -> None:
    """Every constant of the rooms where words are given, by name."""
    named = {
        field
        for phrases in SAID.values()
        for phrase in phrases
        for _, field, _, _ in string.Formatter().parse(phrase)
        if field
    }
    for room in ("words", "lone_arm"):
        constants = {
            f"{room}.{name}"
            for name, value in vars(MODULES[room]).items()
            if name.isupper() and isinstance(value, int | float)
        }
        assert constants
        assert constants <= named


@pytest.mark.parametrize("word", ALL_WORDS)
def test_a_word_that_nothing_says_is_told_to_be_one(word: str) -> None:
    """Looked for in the source: what gives a word names it."""
    name = re.compile(rf"\bQuality\.{word.upper()}\b")
    rooms = [ROOT / "readout" / room for room in ("sighting", "capture")]
    said = any(
        name.search(path.read_text("utf-8")) for room in rooms for path in room.rglob("*.py")
    )
    assert ("Not judged yet" in section(word)) == (not said)


def test_the_remedy_of_what_is_fixed_is_in_plain_words_at_the_terminal() -> None:
    told = quality_words(Quality.SEVERAL_RETURNS)
    for words_of_it in ("Cover the mirror", "--fixed", "nudge the mirror"):
        assert words_of_it in told
    assert quality_words(Quality.OK) == "good"
    assert quality_words(Quality.DIM | Quality.AT_EDGE) == "dim, at edge"


def test_the_page_on_preparing_has_the_numbers_of_the_code() -> None:
    text = " ".join(PREPARING.split())
    assert f"averages {FRAMES} pictures" in text
    more = 100 * ((1 + 1 / FRAMES) ** 0.5 - 1)
    assert f"{more:.1f} % to the noise of a position for {FRAMES}" in text
    assert f"stand {dark.HOT_SDS:g} standard deviations out" in text
    assert f"where more than {100 * MOST_DEFECTIVE:g} % do" in text
