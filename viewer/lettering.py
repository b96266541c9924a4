"""Type on pictures: a system sans with tabular figures, measured and set with Pillow. Knows no suspension.

A machine without fonts gets the one that Pillow carries; signs which that one lacks are replaced by plain ones.
"""

from __future__ import annotations

import unicodedata
from dataclasses import dataclass, field
from typing import TypeAlias

from PIL import Image, ImageDraw, ImageFont

Font: TypeAlias = ImageFont.FreeTypeFont | ImageFont.ImageFont
Colour: TypeAlias = tuple[int, int, int]

#: Sans families with tabular figures and the signs needed, by the file names of common systems; the first one wins.
REGULAR = ("Inter-Regular.ttf", "NotoSans-Regular.ttf", "LiberationSans-Regular.ttf", "DejaVuSans.ttf", "segoeui.ttf")
REGULAR_MORE = ("Helvetica.ttc", "Arial.ttf", "arial.ttf", "FreeSans.ttf")
BOLD = ("Inter-Bold.ttf", "NotoSans-Bold.ttf", "LiberationSans-Bold.ttf", "DejaVuSans-Bold.ttf", "segoeuib.ttf")
#: Signs that a plain font may lack, and what stands for them.
PLAIN = {
    "\N{THIN SPACE}": " ",
    "\N{MINUS SIGN}": "-",
    "\N{EN DASH}": "-",
    "\N{EM DASH}": "-",
    "\N{INFINITY}": "inf",
    "\N{MULTIPLICATION SIGN}": "x",
    "\N{RIGHT SINGLE QUOTATION MARK}": "'",
    "\N{HORIZONTAL ELLIPSIS}": "...",
}


@dataclass
class Lettering:
    """Type at a scale: sizes are given as designed and multiplied by ``scale``.

    families : file names to look for, regular and bold; empty ones give Pillow's own font.
    """

    scale: float
    regular: tuple[str, ...] = REGULAR + REGULAR_MORE
    bold: tuple[str, ...] = BOLD
    _fonts: dict[tuple[float, bool], Font] = field(default_factory=dict)

    def font(self, size: float, bold: bool = False) -> Font:
        """The font for a designed size."""
        key = (size, bold)
        if key not in self._fonts:
            self._fonts[key] = self._find(max(round(size * self.scale), 6), bold)
        return self._fonts[key]

    def _find(self, pixels: int, bold: bool) -> Font:
        for name in (*(self.bold if bold else ()), *self.regular):
            try:
                return ImageFont.truetype(name, pixels)
            except OSError:
                continue
        return ImageFont.load_default(float(pixels))

    def readable(self, text: str, size: float, bold: bool = False) -> str:
        """The text with signs that the font lacks replaced by plain ones."""
        font = self.font(size, bold)
        if not isinstance(font, ImageFont.FreeTypeFont):
            return text.encode("latin-1", "replace").decode("latin-1")
        lacking = _glyph(font, "\uffff")
        return "".join(_plain(letter, font, lacking) for letter in text)

    def width(self, text: str, size: float, bold: bool = False) -> float:
        """Width of a line of text, px."""
        return float(self.font(size, bold).getlength(self.readable(text, size, bold)))

    def height(self, size: float) -> float:
        """Height of a capital letter, px: what text is centred by."""
        box = self.font(size).getbbox("H")
        return float(box[3] - box[1])

    def shorten(self, text: str, size: float, room: float, bold: bool = False) -> str:
        """The text, cut with an ellipsis where it is wider than ``room`` px; empty where nothing fits."""
        if self.width(text, size, bold) <= room:
            return text
        while text and self.width(text + "…", size, bold) > room:
            text = text[:-1]
        return text.rstrip() + "…" if text else ""

    def wrap(self, text: str, size: float, room: float) -> list[str]:
        """Lines no wider than ``room`` px, broken between words."""
        lines = [""]
        for word in text.split():
            longer = f"{lines[-1]} {word}".strip()
            if lines[-1] and self.width(longer, size) > room:
                lines.append(word)
            else:
                lines[-1] = longer
        return lines

    def write(
        self,
        image: Image.Image,
        spot: tuple[float, float],
        text: str,
        size: float,
        colour: Colour,
        *,
        bold: bool = False,
        anchor: str = "ls",
    ) -> None:
        """Set one line: ``anchor`` as Pillow's, "ls" being the left end of the base line."""
        font = self.font(size, bold)
        draw = ImageDraw.Draw(image)
        draw.text((round(spot[0]), round(spot[1])), self.readable(text, size, bold), colour, font=font, anchor=anchor)


def _glyph(font: ImageFont.FreeTypeFont, letter: str) -> tuple[tuple[int, int], bytes]:
    mask = font.getmask(letter)
    return mask.size, bytes(mask)


def _plain(letter: str, font: ImageFont.FreeTypeFont, lacking: tuple[tuple[int, int], bytes]) -> str:
    if letter.isascii() or _glyph(font, letter) != lacking:
        return letter
    if letter in PLAIN:
        return PLAIN[letter]
    bare = unicodedata.normalize("NFKD", letter).encode("ascii", "ignore").decode()
    return bare or "?"
