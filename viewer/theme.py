"""The visual language as named tokens: colours, type sizes, spacing. The only place with colour literals.

Okabe–Ito hues (M. Okabe and K. Ito, "Color Universal Design", 2002, from memory) carry meaning; every meaning has a
second sign besides its colour: a dash pattern, an arrow's direction, a mark, a word.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

#: Type sizes on a picture 540 px high; they grow with it.
SMALL, BODY, HEADING, NUMBER = 11, 13, 16, 28
#: Everything stands on a grid of this many px, on a picture 540 px high.
GRID_PX = 8
#: Height of the picture that the sizes above are meant for, px.
DESIGN_HEIGHT_PX = 540
#: Opacity of one wall of tyre and rim when overlays are on; the two walls that one looks through make 55 % see-through.
SEE_THROUGH: Mapping[str, float] = MappingProxyType({"tyre": 0.26, "rim": 0.13})
#: Opacity of a kept reference.
REFERENCE_OPACITY = 0.4
#: What is drawn over the bodies shows through them this strongly.
BEHIND_OPACITY = 0.30

#: Meanings whose colours must be told apart at a glance, also with a colour-vision deficiency.
MEANINGS = ("tension", "compression", "instant-axis", "force-line", "steering-axis")

_SHARED = {
    "arm": "#8A8F94",
    "rod": "#8A8F94",
    "instant-axis": "#CC79A7",
    "force-line": "#009E73",
    "steering-axis": "#E69F00",
    "gap-tight": "#D55E00",
}


@dataclass(frozen=True)
class Theme:
    """Colours by token, as "#RRGGBB"."""

    name: str
    colours: Mapping[str, str]

    def colour(self, token: str) -> str:
        """Colour of a token; a meaning that is not known here (a plugin's own) is drawn in ink."""
        return self.colours.get(token, self.colours["ink"])

    def rgb(self, token: str) -> tuple[float, float, float]:
        """Colour of a token as three shares 0…1."""
        return unit_rgb(self.colour(token))

    def bytes_rgb(self, token: str) -> tuple[int, int, int]:
        """Colour of a token as three whole numbers 0…255."""
        return byte_rgb(self.colour(token))


def byte_rgb(colour: str) -> tuple[int, int, int]:
    """ "#RRGGBB" as three whole numbers 0…255."""
    return int(colour[1:3], 16), int(colour[3:5], 16), int(colour[5:7], 16)


def unit_rgb(colour: str) -> tuple[float, float, float]:
    """ "#RRGGBB" as three shares 0…1."""
    red, green, blue = byte_rgb(colour)
    return red / 255.0, green / 255.0, blue / 255.0


LIGHT = Theme(
    "light",
    MappingProxyType(
        {
            **_SHARED,
            "background": "#F6F5F1",
            "ground": "#D8D6CE",
            "chassis": "#B8BCC0",
            "knuckle": "#5B6770",
            "tyre": "#3A3D40",
            "rim": "#9DA3A8",
            "rack": "#A3A8AC",
            "spring": "#6E777F",
            "part": "#7C858C",
            "tension": "#D55E00",
            "compression": "#0072B2",
            "wheel-path": "#1B1E21",
            "gap-line": "#1B1E21",
            "contact-patch": "#1B1E21",
            "roll-centre": "#1B1E21",
            "swing-arm": "#5E666C",
            "reference": "#5E666C",
            "ink": "#1B1E21",
            "muted": "#5E666C",
            "plate": "#FFFFFF",
            "hair": "#C9C7BF",
            "accent": "#0072B2",
        }
    ),
)
DARK = Theme(
    "dark",
    MappingProxyType(
        {
            **_SHARED,
            "background": "#1E2226",
            "ground": "#343A40",
            "chassis": "#6B7278",
            "knuckle": "#A9B4BC",
            "tyre": "#202325",
            "rim": "#7D848A",
            "rack": "#767C82",
            "spring": "#8E979E",
            "part": "#8B949B",
            "tension": "#E8833A",
            "compression": "#56B4E9",
            "wheel-path": "#F2F0EA",
            "gap-line": "#F2F0EA",
            "contact-patch": "#F2F0EA",
            "roll-centre": "#F2F0EA",
            "swing-arm": "#A7ADB2",
            "reference": "#A7ADB2",
            "ink": "#F2F0EA",
            "muted": "#A7ADB2",
            "plate": "#2A2F34",
            "hair": "#4A5057",
            "accent": "#56B4E9",
        }
    ),
)


def theme(dark: bool) -> Theme:
    """The dark or the light theme."""
    return DARK if dark else LIGHT


def type_scale(width_px: int, height_px: int) -> float:
    """How much larger than designed type and lines are on a picture of this size; never too small to be read."""
    return max(min(width_px / (DESIGN_HEIGHT_PX * 1.5), height_px / DESIGN_HEIGHT_PX), 0.75)
