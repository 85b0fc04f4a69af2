"""Sieve openings as people write them, in millimetres (ASTM E11 designations)."""

from __future__ import annotations

import re
from fractions import Fraction

#: Alternative designation → nominal opening [mm] (ASTM E11).
_NUMBERED_MM = {
    4: 4.75, 5: 4.0, 6: 3.35, 7: 2.8, 8: 2.36, 10: 2.0, 12: 1.7, 14: 1.4, 16: 1.18, 18: 1.0, 20: 0.85, 25: 0.71,
    30: 0.6, 35: 0.5, 40: 0.425, 45: 0.355, 50: 0.3, 60: 0.25, 70: 0.212, 80: 0.18, 100: 0.15, 120: 0.125,
    140: 0.106, 170: 0.09, 200: 0.075, 230: 0.063, 270: 0.053, 325: 0.045, 400: 0.038,
}  # fmt: skip
_INCH_MM = {
    Fraction(4): 100.0, Fraction(3): 75.0, Fraction(5, 2): 63.0, Fraction(2): 50.0, Fraction(7, 4): 45.0,
    Fraction(3, 2): 37.5, Fraction(5, 4): 31.5, Fraction(1): 25.0, Fraction(7, 8): 22.4, Fraction(3, 4): 19.0,
    Fraction(5, 8): 16.0, Fraction(1, 2): 12.5, Fraction(7, 16): 11.2, Fraction(3, 8): 9.5, Fraction(5, 16): 8.0,
    Fraction(1, 4): 6.3,
}  # fmt: skip


def sieve_mm(text: str) -> float:
    """Opening of a sieve [mm].

    Raises:
        ValueError: not a sieve.

    >>> sieve_mm("No. 200"), sieve_mm("3/4 in"), sieve_mm("1 1/2 in"), sieve_mm("75 um"), sieve_mm("4.75 mm")
    (0.075, 19.0, 37.5, 0.075, 4.75)
    """
    spelled = (
        text.strip().lower().replace("µm", "um").replace("μm", "um").replace("″", "in").replace('"', "in")
    )
    if match := re.fullmatch(r"(?:no\.?|#)\s*(\d+)", spelled):
        number = int(match.group(1))
        if number in _NUMBERED_MM:
            return _NUMBERED_MM[number]
    elif match := re.fullmatch(r"(\d*\.?\d+)\s*(mm|um)", spelled):
        opening = float(match.group(1)) * (0.001 if match.group(2) == "um" else 1.0)
        if 0 < opening <= 1000:
            return opening
    elif match := re.fullmatch(r"(?:(\d+)\s+)?(\d+)(?:/(\d+))?\s*in\.?", spelled):
        whole, top, bottom = match.groups()
        size = Fraction(int(whole or 0)) + (
            Fraction(int(top), int(bottom)) if bottom and int(bottom) else int(top)
        )
        if size in _INCH_MM and not (whole and not bottom):
            return _INCH_MM[size]
    raise ValueError(f'{text!r} is not a sieve; write it as "4.75 mm", "75 um", "No. 200" or "3/4 in"')
