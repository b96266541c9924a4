"""What is written over a drawn frame: title, pose, readings, scale bar, date, caution, and the labels.

Takes a picture drawn at a multiple of its size: shapes go on before it is brought down (so that they are smooth),
letters after (so that they are crisp). Knows no VTK and no mechanics.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray
from PIL import Image, ImageDraw

from knucklepath.plugins.overlays.glyphs import Label
from knucklepath.viewer.label_layout import Box, Placed, Wish, place
from knucklepath.viewer.lettering import Lettering
from knucklepath.viewer.looks import Camera
from knucklepath.viewer.theme import BODY, GRID_PX, HEADING, NUMBER, SMALL, Theme, byte_rgb, type_scale

#: A pixel is busy when it differs from the background by more than this, of 255.
BUSY_DIFFERENCE = 20
#: Lengths that a scale bar may have, mm.
BAR_LENGTHS = (1, 2, 5, 10, 20, 50, 100, 200, 500, 1000, 2000, 5000)
#: A picture lower than this, px, is a thumbnail: words would cover it.
LOWEST_WITH_WORDS = 200
#: How opaque the plates of labels are, and the veil under the words at the edges, of 255.
PLATE_ALPHA, VEIL_ALPHA = 222, 238


@dataclass(frozen=True)
class Figure:
    """One reading as it is shown: "Camber", "−1.50°", and the widest that its number gets, "−88.88°"."""

    title: str
    number: str
    unit: str
    widest: str


@dataclass(frozen=True)
class Caption:
    """The words around a picture. caution : shown where gaps or loads are."""

    title: str
    pose: str
    source: str
    figures: tuple[Figure, ...] = ()
    caution: str = ""


@dataclass
class Annotator:
    """Writes on frames of one size; remembers where labels were, so that they stay calm in a movie.

    size : of the finished picture, px; camera : that drew it; scale_at : (3,) where the scale bar holds, mm.
    """

    size: tuple[int, int]
    camera: Camera
    theme: Theme
    scale_at: NDArray[np.float64]
    lettering: Lettering = field(init=False)
    placed: dict[str, Placed] = field(default_factory=dict)

    def __post_init__(self) -> None:
        self.lettering = Lettering(type_scale(*self.size))
        self._step = GRID_PX * self.lettering.scale

    def finish(self, drawn: Image.Image, caption: Caption, labels: Mapping[str, Label]) -> Image.Image:
        """Write on a frame.

        Parameters
        ----------
        drawn : RGB, a whole multiple of ``size`` large.
        labels : by a name that they keep from frame to frame.

        Returns
        -------
        The finished picture, RGB, ``size`` px.
        """
        times = drawn.width // self.size[0]
        if self.size[1] < LOWEST_WITH_WORDS:
            return drawn.reduce(times) if times > 1 else drawn
        furniture = _Furniture(self, caption)
        placed = self._place(drawn, labels, furniture.boxes)
        brush = ImageDraw.Draw(drawn, "RGBA")
        for item in placed:
            self._plate(brush, item, labels[item.key], times)
        furniture.shapes(brush, times)
        picture = drawn.reduce(times) if times > 1 else drawn
        furniture.words(picture)
        for item in placed:
            at = (item.box.left + self._pad, (item.box.top + item.box.bottom) / 2.0 + self.lettering.height(BODY) / 2.0)
            self.lettering.write(picture, at, labels[item.key].text, BODY, byte_rgb(self.theme.colour("ink")))
        return picture

    @property
    def _pad(self) -> float:
        return 0.9 * self._step

    def _place(self, drawn: Image.Image, labels: Mapping[str, Label], furniture: Sequence[Box]) -> tuple[Placed, ...]:
        width, height = self.size
        edge = 1.5 * self._step
        frame = Box(edge, edge, width - edge, height - edge)
        keep_out = [Box(*furniture_box) for furniture_box in map(_sides, furniture)]
        wishes = []
        for key, label in labels.items():
            anchor = self._anchor(label, frame, keep_out)
            if anchor is not None:
                size = (self.lettering.width(label.text, BODY) + 2.0 * self._pad, 2.6 * self.lettering.height(BODY))
                wishes.append(Wish(key, anchor, size, label.priority))
        found = place(
            wishes,
            frame,
            keep_out,
            leader=3.0 * self._step,
            margin=0.75 * self._step,
            busy=_Busy(drawn, self.size, byte_rgb(self.theme.colour("background"))),
            previous=self.placed,
        )
        self.placed = {item.key: item for item in found}
        return found

    def _anchor(self, label: Label, frame: Box, keep_out: Sequence[Box]) -> tuple[float, float] | None:
        """Where a label points: its place, or the first place along its line that is in the picture."""
        places = label.at[None] if label.along is None else np.concatenate((label.at[None], label.along))
        for x, y, _ in self.camera.project(places, *map(float, self.size)):
            if np.isfinite(x + y) and frame.has((x, y), -self._step) and not any(box.has((x, y)) for box in keep_out):
                return float(x), float(y)
        return None

    def _plate(self, brush: ImageDraw.ImageDraw, item: Placed, label: Label, times: int) -> None:
        colour = byte_rgb(self.theme.colour(label.role))
        thick = max(round(1.4 * self.lettering.scale * times), 1)
        (x, y), (to_x, to_y) = item.anchor, item.elbow
        brush.line([x * times, y * times, to_x * times, to_y * times], (*colour, 255), thick)
        dot = 2.6 * self.lettering.scale * times
        brush.ellipse([x * times - dot, y * times - dot, x * times + dot, y * times + dot], (*colour, 255))
        sides = [side * times for side in _sides(item.box)]
        plate = (*byte_rgb(self.theme.colour("plate")), PLATE_ALPHA)
        brush.rounded_rectangle(sides, 3.0 * self.lettering.scale * times, plate)
        bar = 3.0 * self.lettering.scale * times
        left = sides[0] if item.choice[0] > 0 else sides[2] - bar
        brush.rectangle([left, sides[1], left + bar, sides[3]], (*colour, 255))


def _sides(box: Box) -> tuple[float, float, float, float]:
    return box.left, box.top, box.right, box.bottom


class _Busy:
    """How much of a box covers something drawn: mean over a coarse map, through its summed-area table."""

    def __init__(self, drawn: Image.Image, size: tuple[int, int], background: tuple[int, int, int]) -> None:
        self._cell = max(size[0] // 160, 1)
        coarse = drawn.resize((max(size[0] // self._cell, 1), max(size[1] // self._cell, 1)), Image.Resampling.BOX)
        apart = np.abs(np.asarray(coarse, dtype=np.int16) - np.array(background, dtype=np.int16)).max(axis=2)
        self._sums = np.pad((apart > BUSY_DIFFERENCE).astype(float).cumsum(0).cumsum(1), ((1, 0), (1, 0)))

    def __call__(self, box: Box) -> float:
        rows, columns = self._sums.shape[0] - 1, self._sums.shape[1] - 1
        left, right = (int(np.clip(side / self._cell, 0, columns)) for side in (box.left, box.right))
        top, bottom = (int(np.clip(side / self._cell, 0, rows)) for side in (box.top, box.bottom))
        right, bottom = max(right, left + 1), max(bottom, top + 1)
        right, bottom = min(right, columns), min(bottom, rows)
        area = max((right - left) * (bottom - top), 1)
        sums = self._sums
        return float(sums[bottom, right] - sums[top, right] - sums[bottom, left] + sums[top, left]) / area


class _Furniture:
    """The words and the scale bar along the picture's edges, and the boxes that labels keep clear of."""

    def __init__(self, annotator: Annotator, caption: Caption) -> None:
        self._own, self._caption = annotator, caption
        self._type, step = annotator.lettering, annotator._step
        self._edge = 3.0 * step
        width, height = annotator.size
        self._lines: list[tuple[float, float, str, float, str, bool, str]] = []
        self.boxes: list[Box] = []
        self._head(width, step)
        floor = self._foot(width, height, step)
        self._bar: tuple[float, float, float, str] | None = None
        right = self._scale(width, floor, step)
        self._figures(floor, right, step)

    def _head(self, width: int, step: float) -> None:
        room = width - 2.0 * self._edge
        title = self._type.shorten(self._caption.title, HEADING, room, bold=True)
        base = self._edge + self._type.height(HEADING)
        self._line(self._edge, base, title, HEADING, "ink", bold=True)
        pose = self._type.shorten(self._caption.pose, BODY, room)
        self._line(self._edge, base + 2.75 * step, pose, BODY, "muted")
        reach = max(self._type.width(title, HEADING, bold=True), self._type.width(pose, BODY))
        self.boxes.append(Box(self._edge, self._edge, self._edge + reach, base + 3.25 * step))

    def _foot(self, width: int, height: int, step: float) -> float:
        """The caution at the very bottom; gives the height above which the rest stands."""
        if not self._caption.caution:
            return height - self._edge
        lines = self._type.wrap(self._caption.caution, SMALL, width - 2.0 * self._edge)
        base = height - self._edge
        for line in reversed(lines):
            self._line(self._edge, base, line, SMALL, "muted")
            base -= 1.9 * step
        self.boxes.append(Box(self._edge, base, width - self._edge, height - self._edge))
        return base - 1.4 * step

    def _scale(self, width: int, floor: float, step: float) -> float:
        """Scale bar and source at the right; gives where they begin."""
        camera = self._own.camera
        right = width - self._edge
        source = self._type.shorten(self._caption.source, SMALL, 0.5 * width)
        self._line(right, floor, source, SMALL, "muted", anchor="rs")
        begins = right - self._type.width(source, SMALL)
        top = floor - self._type.height(SMALL)
        per_mm = camera.px_per_mm(self._own.scale_at, float(self._own.size[1]))
        fitting = [length for length in BAR_LENGTHS if length * per_mm <= 0.16 * width]
        if fitting and np.isfinite(per_mm):
            length = fitting[-1] * per_mm
            text = f"{fitting[-1]}\N{THIN SPACE}mm"
            if not camera.look.parallel:
                text += " at the wheel centre"
            base = floor - 3.0 * step
            self._bar = (right - length, base, right, text)
            self._line(right, base - 1.1 * step, text, SMALL, "ink", anchor="rs")
            begins = min(begins, right - max(length, self._type.width(text, SMALL)))
            top = base - 1.4 * step - self._type.height(SMALL)
        self.boxes.append(Box(begins, top, right, floor))
        return begins

    def _figures(self, floor: float, right: float, step: float) -> None:
        """Readings along the bottom, as many as there is room for; each keeps its place while numbers change."""
        x, tops = self._edge, floor - self._type.height(NUMBER) - 1.4 * step - self._type.height(SMALL)
        for figure in self._caption.figures:
            number = self._type.width(figure.widest, NUMBER)
            unit = self._type.width(figure.unit, BODY)
            wide = max(number + unit, self._type.width(figure.title, SMALL))
            if x + wide > right - 2.0 * step:
                break
            self._line(x, floor - self._type.height(NUMBER) - 1.4 * step, figure.title, SMALL, "muted")
            self._line(x, floor, figure.number, NUMBER, "ink")
            # the unit stands close to its number
            self._line(x + self._type.width(figure.number, NUMBER), floor, figure.unit, BODY, "ink")
            self.boxes.append(Box(x, tops, x + wide, floor))
            x += wide + 3.0 * step

    def _line(
        self, x: float, y: float, text: str, size: float, role: str, *, bold: bool = False, anchor: str = "ls"
    ) -> None:
        self._lines.append((x, y, text, size, role, bold, anchor))

    def shapes(self, brush: ImageDraw.ImageDraw, times: int) -> None:
        """A veil that keeps lines of the scene out of the words, and the scale bar, a line with end ticks."""
        veil = (*byte_rgb(self._own.theme.colour("background")), VEIL_ALPHA)
        pad = 0.75 * self._own._step
        for box in self.boxes:
            left, top, right, bottom = _sides(box)
            spread = [side * times for side in (left - pad, top - pad, right + pad, bottom + pad)]
            brush.rounded_rectangle(spread, pad * times, veil)
        if self._bar is None:
            return
        left, y, right, _ = self._bar
        ink = (*byte_rgb(self._own.theme.colour("ink")), 255)
        thick = max(round(1.5 * self._type.scale * times), 1)
        tick = 0.5 * self._own._step * times
        brush.line([left * times, y * times, right * times, y * times], ink, thick)
        for x in (left, right):
            brush.line([x * times, y * times - tick, x * times, y * times + tick], ink, thick)

    def words(self, picture: Image.Image) -> None:
        """All lines of text."""
        for x, y, text, size, role, bold, anchor in self._lines:
            colour = byte_rgb(self._own.theme.colour(role))
            self._type.write(picture, (x, y), text, size, colour, bold=bold, anchor=anchor)
