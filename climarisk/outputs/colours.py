"""Colours and shapes of the bands, the same in the map, the report and the workbook."""

from __future__ import annotations

#: Sequential scheme "YlOrBr" of ColorBrewer 2.0 by Cynthia Brewer and Mark Harrower (Pennsylvania
#: State University), which its authors mark as safe for colour-blind readers: number of classes ->
#: colours, the lowest class first.
YLORBR: dict[int, tuple[str, ...]] = {
    1: ("#fec44f",),
    2: (
        "#fff7bc",
        "#fe9929",
    ),
    3: (
        "#fff7bc",
        "#fec44f",
        "#d95f0e",
    ),
    4: (
        "#ffffd4",
        "#fed98e",
        "#fe9929",
        "#cc4c02",
    ),
    5: (
        "#ffffd4",
        "#fed98e",
        "#fe9929",
        "#d95f0e",
        "#993404",
    ),
    6: (
        "#ffffd4",
        "#fee391",
        "#fec44f",
        "#fe9929",
        "#d95f0e",
        "#993404",
    ),
    7: (
        "#ffffd4",
        "#fee391",
        "#fec44f",
        "#fe9929",
        "#ec7014",
        "#cc4c02",
        "#8c2d04",
    ),
    8: (
        "#ffffe5",
        "#fff7bc",
        "#fee391",
        "#fec44f",
        "#fe9929",
        "#ec7014",
        "#cc4c02",
        "#8c2d04",
    ),
    9: (
        "#ffffe5",
        "#fff7bc",
        "#fee391",
        "#fec44f",
        "#fe9929",
        "#ec7014",
        "#cc4c02",
        "#993404",
        "#662506",
    ),
}
#: Band edges beyond this many are left out: the scheme has nine classes at most.
MOST_EDGES = 8

#: Outlines around (0, 0) in a square of 26, a shape for each band beside its colour; the last one
#: serves every further band.
SHAPES: tuple[str, ...] = (
    "M0,-10.5A10.5,10.5 0 1 1 0,10.5A10.5,10.5 0 1 1 0,-10.5Z",
    "M-9.5,-9.5H9.5V9.5H-9.5Z",
    "M0,-13L13,0L0,13L-13,0Z",
    "M0,-12L13,10.5H-13Z",
    "M0,12L13,-10.5H-13Z",
    "M-6.5,-11.3H6.5L13,0L6.5,11.3H-6.5L-13,0Z",
)
NO_DATA_SHAPE = "M-11,-11L11,11M-11,11L11,-11"

#: Black and white ink have the same contrast on this luminance: (L + 0.05)^2 = 1.05 * 0.05
#: from the contrast ratio of WCAG 2.2.
_EVEN_LUMINANCE = (1.05 * 0.05) ** 0.5 - 0.05


def luminance(colour: str) -> float:
    """Relative luminance of ``#rrggbb``, 0-1 (WCAG 2.2)."""
    parts = [int(colour[at : at + 2], 16) / 255.0 for at in (1, 3, 5)]
    red, green, blue = (p / 12.92 if p <= 0.04045 else ((p + 0.055) / 1.055) ** 2.4 for p in parts)
    return 0.2126 * red + 0.7152 * green + 0.0722 * blue


def ink_on(colour: str) -> str:
    """Black or white, whichever has the higher contrast on the colour."""
    return "#000000" if luminance(colour) > _EVEN_LUMINANCE else "#ffffff"
