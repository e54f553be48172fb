"""Letters for pictures made without a window: a face of our own, 5 by 7 dots, ASCII."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

WIDTH, HEIGHT = 5, 7
ADVANCE = 6

# From the space to the tilde, 35 dots a letter, row by row from the top, as one number each.
_PACKED = (
    "000000000 108421004 294000000 295f57d4a 11f4717c4 674222173 32544564d 108000000 "
    "088842082 208210888 02aefbaa0 0084f9080 000001844 0000f8000 00000018c 042222210 "
    "3a33ae62e 11842108e 3a211111f 3a213062e 08ca97c42 7e1e0862e 1910f462e 7c2211084 "
    "3a317462e 3a317844c 000400080 000400088 088882082 001f07c00 208208888 3a2111004 "
    "3a37ade0e 3a31fc631 7a31f463e 3a308422e 7a318c63e 7e10f421f 7e10f4210 3a30bc62f "
    "4631fc631 38842108e 1c4210a4c 4654c5251 42108421f 4775ac631 47359c631 3a318c62e "
    "7a31f4210 3a318d64d 7a31f5251 3e107043e 7c8421084 46318c62e 463152944 4631ad771 "
    "462a22a31 462a21084 7c222221f 39084210e 420820821 38421084e 115100000 00000001f "
    "208000000 000e0be2f 421e8c63e 000e8422e 042f8c62f 000e8fe0e 1928e2108 000f8bc2e "
    "421e8c631 100c2108e 080610a4c 4212a6292 30842108e 001aad6b5 001e8c631 000e8c62e "
    "001e8fa10 000f8bc21 0016cc210 000f8383e 211c42126 00118c62f 00118a944 0011ad6aa "
    "001151151 00118bc2e 001f1111f 0c8441083 108421084 608411098 0009ac800 "
)
_NUMBERS = tuple(int(text, 16) for text in _PACKED.split())


def text_width(text: str, scale: int) -> int:
    """Pixels that a text takes across."""
    return max(0, len(text) * ADVANCE - 1) * scale


def text_mask(text: str, scale: int) -> NDArray[np.bool_]:
    """Dots of a text, bool of shape (HEIGHT * scale, text_width); other letters than ASCII become "?"."""
    mask = np.zeros((HEIGHT, max(1, len(text) * ADVANCE - 1)), np.bool_)
    for place, letter in enumerate(text):
        code = ord(letter) if " " <= letter <= "~" else ord("?")
        number = _NUMBERS[code - 32]
        for dot in range(WIDTH * HEIGHT):
            if number >> (WIDTH * HEIGHT - 1 - dot) & 1:
                mask[dot // WIDTH, place * ADVANCE + dot % WIDTH] = True
    return np.kron(mask, np.ones((scale, scale), np.bool_))
