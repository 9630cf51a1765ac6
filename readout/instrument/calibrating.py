"""From a calibration set to a calibration: each frame sighted, the tilts fitted, signs and axes."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np

from readout.angle import Calibration, TiltSet, calibrate_known_tilts
from readout.angle.axes import turn_of_move, turned_to
from readout.angle.graduation import calibrate_graduation, refuse_other_meaning
from readout.angle.scales import Ratio, ratio_of_steps
from readout.angle.signs import Change, Foil, SignVerdict, judge_foil, judge_nudge, with_signs
from readout.angle.two_returns import front_first
from readout.errors import BadInput
from readout.files.calibration_set import CalibrationSet, KnownTilt
from readout.files.calibration_set_about import GraduationPart
from readout.instrument.set_frames import SetFrames, words_of
from readout.model import F64, Quality, Sighting
from readout.sighting.graduation import find_graduation

WHICH_FACE = (
    "the brighter return was taken for the front face's: if it is not, both axes run backwards"
)
Place = tuple[float, float, tuple[float, float, float]]
"""x and y, px, and their covariance (xx, xy, yy)"""


def calibrate_set(
    given: CalibrationSet, *, created_utc: str, on_frame: Callable[[int], None] | None = None
) -> Calibration:
    """Sight every frame of the set, fit the calibration, show its signs and turn its axes.

    Frames that show no target, or only a doubtful one, are left out and named in the warnings.
    Raises BadInput where no calibration comes of it.
    """
    frames = SetFrames(given)
    if given.graduation is None or given.marks_file is None:
        made = _by_tilts(given, frames, *_seen(given, frames, on_frame), created_utc)
    else:
        part, file = given.graduation, given.marks_file
        made = _by_graduation(given, part, file, frames, created_utc, on_frame)
    return _with_axes(given, frames, _with_signs(given, frames, made, created_utc))


def _by_graduation(
    given: CalibrationSet,
    part: GraduationPart,
    file: str,
    frames: SetFrames,
    created_utc: str,
    on_frame: Callable[[int], None] | None,
) -> Calibration:
    """The scale from the marks; tilts of the set, if any, check it."""
    pixels, full_scale = frames.pixels(file)
    frames.digest.update(repr((part, given.pitch_um, given.own_lens)).encode())
    try:
        made = calibrate_graduation(
            find_graduation(pixels, full_scale=full_scale),
            part.division,
            given.camera(*frames.size),
            own_lens=given.own_lens,
            target=given.target,
            created_utc=created_utc,
            calibration_id=f"marks-{frames.digest.hexdigest()[:10]}",
        )
    except BadInput as error:
        raise BadInput(f"{given.folder / file}: {error}") from error
    if given.nominal_focal_length_mm is not None:
        refuse_other_meaning(made, given.nominal_focal_length_mm)
    origin = {
        "set": Path(given.folder).name,
        "marks": file,
        "note": given.note,
        "fixed": given.fixed,
    }
    made = replace(made, made_from={**made.made_from, **origin})
    seen, left_out = _seen(given, frames, on_frame)
    if len(seen) < 2:
        return replace(made, warnings=(*made.warnings, *left_out))
    verdict = ratio_of_steps(made, _sighted_tilts(given, seen))
    if verdict is None:
        return replace(made, warnings=(*made.warnings, *left_out))
    if verdict.says in (Ratio.HALF, Ratio.DOUBLE):
        raise BadInput(
            f"the steps of {given.folder / 'tilts.csv'} as the marks measure them: {verdict.text}; "
            "change marked_as in set.toml, or correct the tilts"
        )
    told = f"steps of the {given.way} as the marks measure them: {verdict.text}"
    return replace(made, warnings=(*made.warnings, told, *left_out))


Seen = list[tuple[int, list[Place]]]
"""number of a row, and the return or both returns of its frame"""


def _seen(
    given: CalibrationSet, frames: SetFrames, on_frame: Callable[[int], None] | None
) -> tuple[Seen, list[str]]:
    """The returns of each row's frame, and what was left out."""
    seen: Seen = []
    left_out = []
    for row, tilt in enumerate(given.tilts):
        sighting = frames.sighted(tilt.file)
        places = _places(sighting, two=given.two_returns)
        if places:
            seen.append((row, places))
        else:
            left_out.append(_left_out(tilt, sighting, two=given.two_returns))
        if on_frame is not None:
            on_frame(row + 1)
    if given.two_returns and seen:
        _order_faces(given, seen)
    return seen, left_out


def _sighted_tilts(given: CalibrationSet, seen: Seen) -> TiltSet:
    """What is known of the rows seen, with their places."""
    per_row = 2 if given.two_returns else 1
    return given.planned().seen(
        [row * per_row + k for row, places in seen for k in range(len(places))],
        np.array([place[:2] for _, places in seen for place in places]),
        np.array([place[2] for _, places in seen for place in places]),
    )


def _by_tilts(
    given: CalibrationSet, frames: SetFrames, seen: Seen, left_out: list[str], created_utc: str
) -> Calibration:
    """The fit to known tilts."""
    if not seen:
        first = given.tilts[0]
        raise BadInput(
            f"no frame in {given.folder} shows a {given.target.value}: look at {first.file} "
            f"(line {first.line} of tilts.csv) and the others"
        )
    tilts = _sighted_tilts(given, seen)
    frames.digest.update(
        repr((given.tilts, given.scale_rel_sd, given.pitch_um, given.way)).encode()
    )
    try:
        made = calibrate_known_tilts(
            tilts,
            given.camera(*frames.size),
            created_utc=created_utc,
            calibration_id=f"tilts-{frames.digest.hexdigest()[:10]}",
            way=given.way,
        )
    except BadInput as error:
        if left_out:
            raise BadInput(f"{error}; {left_out[0]}") from error
        raise
    faces = (WHICH_FACE,) if given.two_returns else ()
    return replace(
        made,
        target=given.target,
        warnings=(*made.warnings, *faces, *left_out),
        made_from={
            "set": Path(given.folder).name,
            "note": given.note,
            "scale_rel_sd": given.scale_rel_sd,
            "shared": [item.name for item in tilts.shared],
            "frames": len(given.tilts),
            "fixed": given.fixed,
        },
    )


def _places(sighting: Sighting, *, two: bool) -> list[Place]:
    """The return, or both; empty where they are not there without a doubt."""
    main = (sighting.x_px, sighting.y_px, sighting.cov_px2)
    if not two:
        return [main] if sighting.found and not sighting.quality else []
    others = [(o.x_px, o.y_px, o.cov_px2) for o in sighting.others if not o.lone]
    doubts = sighting.quality & ~Quality.SEVERAL_RETURNS
    return [main, others[0]] if sighting.found and others and not doubts else []


def _left_out(tilt: KnownTilt, sighting: Sighting, *, two: bool) -> str:
    seen = "there is one return only" if two and sighting.found else words_of(sighting)
    return (
        f"{tilt.file} (line {tilt.line} of tilts.csv) was left out: {seen}; take it again, or "
        "take its row out"
    )


def _order_faces(given: CalibrationSet, seen: list[tuple[int, list[Place]]]) -> None:
    """Put the front face's return first in each frame."""
    main, other = (np.array([places[k][:2] for _, places in seen]) for k in (0, 1))
    turns_deg = np.array([given.tilts[row].turn_deg for row, _ in seen])
    for (_, places), kept in zip(seen, front_first(main, other, turns_deg), strict=True):
        if not kept:
            places.reverse()


def _with_signs(
    given: CalibrationSet, frames: SetFrames, made: Calibration, created_utc: str
) -> Calibration:
    """What the nudges and foils of the set show."""
    verdicts: list[SignVerdict] = []
    done_utc = created_utc
    for nudge in given.nudges:
        verdicts.append(judge_nudge(nudge.edge, _change(frames, made, nudge.before, nudge.after)))
        done_utc = nudge.done_utc or done_utc
    for part in given.foils:
        foil = Foil(part.thickness_mm, part.base_mm, part.thickness_sd_mm, part.base_sd_mm)
        verdicts.append(judge_foil(foil, _change(frames, made, part.before, part.after)))
        done_utc = part.done_utc or done_utc
    return with_signs(made, verdicts, done_utc=done_utc)


def _with_axes(given: CalibrationSet, frames: SetFrames, made: Calibration) -> Calibration:
    """The axes of the machine, if the set holds a move about one of them."""
    if given.axes is None:
        return made
    tilts, covs = zip(*(_tilt(frames, made, file) for file in given.axes.files), strict=True)
    turn = turn_of_move(np.array(tilts), np.array(covs), axis=given.axes.single_axis)
    told = (
        f"axes turned by {-turn.turn_deg:.3f}° ± {turn.turn_sd_deg:.3f}° to the machine's "
        f"{given.axes.single_axis.upper()} move: {turn.leak_arcsec_per_100:.2f}″ of each 100″ "
        "had leaked into the other axis"
    )
    made = turned_to(made, turn)
    return replace(made, warnings=(*made.warnings, told))


def _change(frames: SetFrames, made: Calibration, before: str, after: str) -> Change:
    (first, first_cov), (second, second_cov) = (_tilt(frames, made, f) for f in (before, after))
    step, cov = second - first, first_cov + second_cov
    return Change(
        float(step[0]), float(step[1]), math.sqrt(float(cov[0, 0])), math.sqrt(float(cov[1, 1]))
    )


def _tilt(frames: SetFrames, made: Calibration, file: str) -> tuple[F64, F64]:
    sighting = frames.good(file)
    tilt = np.array([float(v) for v in made.tilt(sighting.x_px, sighting.y_px)])
    return tilt, made.noise_cov(sighting.x_px, sighting.y_px, sighting.cov_px2)
