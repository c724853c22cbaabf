"""Text as pixels: a 5x7 face with capitals, digits and a few signs."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

__all__ = ["draw_text"]

_ROWS: dict[str, str] = {
    " ": "00 00 00 00 00 00 00",
    "A": "0E 11 11 1F 11 11 11",
    "B": "1E 11 11 1E 11 11 1E",
    "C": "0E 11 10 10 10 11 0E",
    "D": "1E 11 11 11 11 11 1E",
    "E": "1F 10 10 1E 10 10 1F",
    "F": "1F 10 10 1E 10 10 10",
    "G": "0E 11 10 17 11 11 0F",
    "H": "11 11 11 1F 11 11 11",
    "I": "0E 04 04 04 04 04 0E",
    "J": "07 02 02 02 02 12 0C",
    "K": "11 12 14 18 14 12 11",
    "L": "10 10 10 10 10 10 1F",
    "M": "11 1B 15 15 11 11 11",
    "N": "11 19 15 13 11 11 11",
    "O": "0E 11 11 11 11 11 0E",
    "P": "1E 11 11 1E 10 10 10",
    "Q": "0E 11 11 11 15 12 0D",
    "R": "1E 11 11 1E 14 12 11",
    "S": "0F 10 10 0E 01 01 1E",
    "T": "1F 04 04 04 04 04 04",
    "U": "11 11 11 11 11 11 0E",
    "V": "11 11 11 11 11 0A 04",
    "W": "11 11 11 15 15 1B 11",
    "X": "11 11 0A 04 0A 11 11",
    "Y": "11 11 0A 04 04 04 04",
    "Z": "1F 01 02 04 08 10 1F",
    "0": "0E 11 13 15 19 11 0E",
    "1": "04 0C 04 04 04 04 0E",
    "2": "0E 11 01 06 08 10 1F",
    "3": "1F 02 04 02 01 11 0E",
    "4": "02 06 0A 12 1F 02 02",
    "5": "1F 10 1E 01 01 11 0E",
    "6": "06 08 10 1E 11 11 0E",
    "7": "1F 01 02 04 08 08 08",
    "8": "0E 11 11 0E 11 11 0E",
    "9": "0E 11 11 0F 01 02 0C",
    "-": "00 00 00 1F 00 00 00",
    ".": "00 00 00 00 00 0C 0C",
    ":": "00 0C 0C 00 0C 0C 00",
    "/": "01 01 02 04 08 10 10",
}


def draw_text(text: str, scale: int = 1) -> npt.NDArray[np.bool_]:
    """Text as a mask, True where a letter is inked: (7 * scale, 6 * scale * len(text)).

    Raises
    ------
    ValueError
        For a character that the face lacks.
    """
    missing = sorted(set(text) - set(_ROWS))
    if missing:
        raise ValueError(f"no letters for {missing}, expected capitals, digits, space and - . : /")
    letters = [
        [[int(row, 16) >> bit & 1 for bit in (4, 3, 2, 1, 0, 5)] for row in _ROWS[sign].split()] for sign in text
    ]
    mask = np.concatenate(np.array(letters, dtype=bool), axis=1)
    return np.repeat(np.repeat(mask, scale, axis=0), scale, axis=1)
