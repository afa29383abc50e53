"""Large capital letters for words that are read across a room, in half-block characters.

Five by seven picture elements as on the matrix displays of instruments (common practice); one row of text holds two
rows of picture.  Lower case is drawn as capitals, so whoever needs the exact spelling writes it beside.
"""

_LETTERS = {
    "A": "01110 10001 10001 11111 10001 10001 10001", "B": "11110 10001 10001 11110 10001 10001 11110",
    "C": "01110 10001 10000 10000 10000 10001 01110", "D": "11110 10001 10001 10001 10001 10001 11110",
    "E": "11111 10000 10000 11110 10000 10000 11111", "F": "11111 10000 10000 11110 10000 10000 10000",
    "G": "01110 10001 10000 10111 10001 10001 01110", "H": "10001 10001 10001 11111 10001 10001 10001",
    "I": "111 010 010 010 010 010 111", "J": "00111 00010 00010 00010 00010 10010 01100",
    "K": "10001 10010 10100 11000 10100 10010 10001", "L": "10000 10000 10000 10000 10000 10000 11111",
    "M": "10001 11011 10101 10101 10001 10001 10001", "N": "10001 11001 10101 10011 10001 10001 10001",
    "O": "01110 10001 10001 10001 10001 10001 01110", "P": "11110 10001 10001 11110 10000 10000 10000",
    "Q": "01110 10001 10001 10001 10101 10010 01101", "R": "11110 10001 10001 11110 10100 10010 10001",
    "S": "01111 10000 10000 01110 00001 00001 11110", "T": "11111 00100 00100 00100 00100 00100 00100",
    "U": "10001 10001 10001 10001 10001 10001 01110", "V": "10001 10001 10001 10001 10001 01010 00100",
    "W": "10001 10001 10001 10101 10101 11011 10001", "X": "10001 10001 01010 00100 01010 10001 10001",
    "Y": "10001 10001 01010 00100 00100 00100 00100", "Z": "11111 00001 00010 00100 01000 10000 11111",
    "0": "01110 10001 10011 10101 11001 10001 01110", "1": "00100 01100 00100 00100 00100 00100 01110",
    "2": "01110 10001 00001 00110 01000 10000 11111", "3": "11110 00001 00001 01110 00001 00001 11110",
    "4": "00010 00110 01010 10010 11111 00010 00010", "5": "11111 10000 11110 00001 00001 10001 01110",
    "6": "01110 10000 10000 11110 10001 10001 01110", "7": "11111 00001 00010 00100 00100 01000 01000",
    "8": "01110 10001 10001 01110 10001 10001 01110", "9": "01110 10001 10001 01111 00001 00001 01110",
    "-": "000 000 000 111 000 000 000", ".": "0 0 0 0 0 0 1", ":": "0 1 0 0 0 1 0", ",": "00 00 00 00 00 01 10",
    "/": "00001 00010 00010 00100 01000 01000 10000", "_": "00000 00000 00000 00000 00000 00000 11111",
    "+": "00000 00100 00100 11111 00100 00100 00000", "(": "01 10 10 10 10 10 01", ")": "10 01 01 01 01 01 10",
    "#": "01010 01010 11111 01010 11111 01010 01010", " ": "000 000 000 000 000 000 000",
}
HEIGHT = 7
SCALES = (3, 2, 1)  # largest first


def rows_of(scale: int) -> int:
    """Return the rows of text that a word takes at this scale."""
    return (HEIGHT * scale + 1) // 2


def width_of(text: str, scale: int) -> int | None:
    """Return the columns that ``text`` takes, None where a sign has no picture."""
    letters = text.upper()
    if not letters or any(letter not in _LETTERS for letter in letters):
        return None
    return sum((len(_LETTERS[letter].split()[0]) + 1) * scale for letter in letters) - scale


def large_words(text: str, width: int, rows: int) -> list[str]:
    """Return ``text`` as large as it fits into ``width`` columns and ``rows`` rows; empty where it does not fit."""
    for scale in SCALES:
        columns = width_of(text, scale)
        if columns is not None and columns <= width and rows_of(scale) <= rows:
            return _drawn(text.upper(), scale)
    return []


def _drawn(text: str, scale: int) -> list[str]:
    glyphs = [_LETTERS[letter].split() for letter in text]
    picture: list[str] = []
    for element in range(HEIGHT):
        row = (" " * scale).join("".join(("1" if bit == "1" else " ") * scale for bit in glyph[element])
                                 for glyph in glyphs)
        picture += [row] * scale
    if len(picture) % 2:
        picture.append(" " * len(picture[0]))
    marks = {("1", "1"): "█", ("1", " "): "▀", (" ", "1"): "▄", (" ", " "): " "}
    return ["".join(marks[pair] for pair in zip(upper, lower, strict=True))
            for upper, lower in zip(picture[::2], picture[1::2], strict=True)]
