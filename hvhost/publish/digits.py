"""Large digits for a readback that is read across a room: two bitmaps, scaled into half-block characters.

One row of text holds two rows of picture.  A reading that is old is drawn hatched, so that nobody needs colour to
see it.
"""

from dataclasses import dataclass

_SMALL = {
    "0": "111 101 101 101 111", "1": "010 110 010 010 111", "2": "111 001 111 100 111", "3": "111 001 111 001 111",
    "4": "101 101 111 001 001", "5": "111 100 111 001 111", "6": "111 100 111 101 111", "7": "111 001 001 001 001",
    "8": "111 101 111 101 111", "9": "111 101 111 001 111", "-": "00 00 11 00 00", ".": "0 0 0 0 1",
    " ": "000 000 000 000 000",
}
_TALL = {
    "0": "01110 10001 10001 10001 10001 10001 01110", "1": "00100 01100 00100 00100 00100 00100 01110",
    "2": "01110 10001 00001 00110 01000 10000 11111", "3": "11110 00001 00001 01110 00001 00001 11110",
    "4": "00010 00110 01010 10010 11111 00010 00010", "5": "11111 10000 11110 00001 00001 10001 01110",
    "6": "01110 10000 10000 11110 10001 10001 01110", "7": "11111 00001 00010 00100 00100 01000 01000",
    "8": "01110 10001 10001 01110 10001 10001 01110", "9": "01110 10001 10001 01111 00001 00001 01110",
    "-": "000 000 000 111 000 000 000", ".": "0 0 0 0 0 0 1", " ": "00000 00000 00000 00000 00000 00000 00000",
}


@dataclass(frozen=True, slots=True, kw_only=True)
class DigitSize:
    """A bitmap with its scale: ``wide`` columns and ``high`` half rows per picture element."""

    glyphs: tuple[tuple[str, tuple[str, ...]], ...]
    wide: int
    high: int
    gap: int

    @property
    def rows(self) -> int:
        """Rows of text that a number takes."""
        elements = len(self.glyphs[0][1])
        return (elements * self.high + 1) // 2

    def width(self, text: str) -> int:
        """Columns that ``text`` takes."""
        glyphs = dict(self.glyphs)
        return sum(len(glyphs[letter][0]) * self.wide + self.gap for letter in text) - self.gap


def _size(font: dict[str, str], wide: int, high: int, gap: int) -> DigitSize:
    glyphs = tuple((letter, tuple(rows.split())) for letter, rows in font.items())
    return DigitSize(glyphs=glyphs, wide=wide, high=high, gap=gap)


# Largest first; a glyph is about as wide as three fifths of its height on a terminal's 1:2 cells.
SIZES = (
    _size(_TALL, 4, 4, 4), _size(_TALL, 3, 3, 3), _size(_TALL, 2, 2, 2), _size(_SMALL, 2, 2, 1), _size(_SMALL, 1, 1, 1),
)


def best_size(text: str, width: int, rows: int) -> DigitSize | None:
    """Return the largest size in which ``text`` fits; None where none does or a sign has no picture."""
    if any(letter not in _SMALL for letter in text):  # 'nan', 'inf', '1e+30'
        return None
    return next((size for size in SIZES if size.rows <= rows and size.width(text) <= width), None)


def big_lines(text: str, size: DigitSize, hatched: bool = False) -> list[str]:
    """Return ``size.rows`` lines of equal width that draw ``text`` (digits, '-', '.' and blanks)."""
    glyphs = dict(size.glyphs)
    picture: list[str] = []
    for element in range(len(size.glyphs[0][1])):
        row = (" " * size.gap).join(
            "".join(("1" if bit == "1" else " ") * size.wide for bit in glyphs[letter][element]) for letter in text)
        picture += [row] * size.high
    if len(picture) % 2:
        picture.append(" " * len(picture[0]))
    full = "▒" if hatched else "█"
    marks = {("1", "1"): full, ("1", " "): "▀", (" ", "1"): "▄", (" ", " "): " "}
    return ["".join(marks[pair] for pair in zip(upper, lower, strict=True))
            for upper, lower in zip(picture[::2], picture[1::2], strict=True)]
