"""The motion as a movie: GIF with Pillow, MP4 with imageio-ffmpeg where it is installed."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterable, Iterator, Sequence
from pathlib import Path
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray
from PIL import Image

from knucklepath.kinematics.errors import KnucklepathError
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.viewer.exports.studio import Studio
from knucklepath.viewer.exports.writing import whole_file
from knucklepath.viewer.project import Project
from knucklepath.viewer.reach import require_reached

Array: TypeAlias = NDArray[np.float64]

#: Pictures a second: a GIF counts time in hundredths, an MP4 does as screens do.
GIF_RATE, MP4_RATE = 20, 30
#: Numbers change at most so many times a second.
NUMBER_RATE = 10
#: Frames from which the shared palette is made, and its colours.
PALETTE_FRAMES, COLOURS = 5, 255
#: Longest cycle, s: a slip of the finger should not fill a disk.
LONGEST_S = 120.0


def write_movie(
    project: Project,
    out: str | Path,
    *,
    rack_mm: float = 0.0,
    look: str = "corner",
    show: Sequence[str] | None = None,
    size: tuple[int, int] = (960, 540),
    seconds: float = 3.0,
    dark: bool = False,
    progress: Callable[[int, int], None] | None = None,
) -> None:
    """Draw one cycle of travel and write it as GIF or MP4, all or nothing; it loops without a jump.

    Parameters
    ----------
    out : ends in .gif or .mp4; rack_mm : held meanwhile; look, show, size, dark : as for a picture.
    seconds : length of the cycle; progress : called with frames done and frames in all.

    Raises
    ------
    ReachError : the mechanism locks before the project's limits of travel.
    KnucklepathError : another file name, MP4 without its package, an unknown look or overlay, or a machine that
        cannot draw.
    """
    suffix = Path(out).suffix.lower()
    if suffix not in (".gif", ".mp4"):
        raise KnucklepathError(f"{out}: movies are GIF or MP4; give a name that ends in .gif or .mp4")
    if not 0.0 < seconds <= LONGEST_S:
        raise KnucklepathError(f"--seconds: a cycle takes more than 0 and at most {LONGEST_S:g} s")
    if suffix == ".mp4":
        _require_ffmpeg(out)
    rate = GIF_RATE if suffix == ".gif" else MP4_RATE
    motion = solve_motion(project.corner, travel_over_time(project, seconds, rate), rack_mm)
    require_reached(motion)
    with (
        whole_file(out) as path,
        Studio(project, look_text=look, show=show, size=size, dark=dark, rack_mm=rack_mm) as studio,
    ):
        frames = _frames(studio, motion, rate, progress)
        if suffix == ".gif":
            write_gif(path, list(frames), rate)
        else:
            _write_mp4(path, frames, size, rate)
        for fault in studio.faults():
            print(f"note: {fault}", file=sys.stderr)


def travel_over_time(project: Project, seconds: float, rate: int) -> Array:
    """(n,) travel, mm, of each frame of one cycle: a sine over the whole travel that starts at design, upwards."""
    middle, half = (project.bump - project.rebound) / 2.0, (project.bump + project.rebound) / 2.0
    count = max(round(seconds * rate), 2)
    phase = np.arcsin(-middle / half) + 2.0 * np.pi * np.arange(count) / count
    return np.asarray(middle + half * np.sin(phase))


def _frames(
    studio: Studio, motion: Motion, rate: int, progress: Callable[[int, int], None] | None
) -> Iterator[Image.Image]:
    count = motion.shape[0]
    ticked = -1
    for number in range(count):
        tick = int(number * NUMBER_RATE / rate)
        yield studio.frame(motion[number], new_numbers=tick != ticked)
        ticked = tick
        if progress is not None:
            progress(number + 1, count)


def write_gif(path: Path, frames: Sequence[Image.Image], rate: int) -> None:
    """Write frames as a GIF that loops, all in one palette, so that flat colours do not flicker."""
    chosen = np.unique(np.linspace(0, len(frames) - 1, PALETTE_FRAMES).round().astype(int))
    width, height = frames[0].size
    sheet = Image.new("RGB", (width, height * len(chosen)))
    for row, number in enumerate(chosen):
        sheet.paste(frames[number], (0, row * height))
    palette = sheet.quantize(COLOURS, method=Image.Quantize.MEDIANCUT, kmeans=1)
    plain = [frame.quantize(palette=palette, dither=Image.Dither.NONE) for frame in frames]
    plain[0].save(
        path, "GIF", save_all=True, append_images=plain[1:], duration=1000 // rate, loop=0, optimize=False, disposal=1
    )


def _require_ffmpeg(out: str | Path) -> None:
    try:
        import imageio_ffmpeg  # noqa: F401
    except ImportError:
        raise KnucklepathError(
            f"{out}: MP4 needs the extra 'movie': pip install 'knucklepath[movie]'; a .gif works without it"
        ) from None


def _write_mp4(path: Path, frames: Iterable[Image.Image], size: tuple[int, int], rate: int) -> None:
    """H.264 in 4:2:0, which every player and slide program shows; odd sizes lose a row or column."""
    import imageio_ffmpeg

    even = (size[0] // 2 * 2, size[1] // 2 * 2)
    writer = imageio_ffmpeg.write_frames(
        str(path),
        even,
        fps=rate,
        codec="libx264",
        macro_block_size=1,
        quality=None,
        output_params=["-crf", "18", "-preset", "medium", "-movflags", "+faststart"],
    )
    writer.send(None)
    try:
        for frame in frames:
            writer.send(np.ascontiguousarray(np.asarray(frame)[: even[1], : even[0]]).tobytes())
    finally:
        writer.close()
