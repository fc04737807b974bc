"""Refuses characters that look like numbers or units and are read differently by different people."""

from __future__ import annotations

import re
import unicodedata
from fractions import Fraction
from typing import Final

from scanmass.errors import UserFault

_WELCOME: Final = set("±µμ°³\t")
_INSTEAD: Final = {
    "−": "a plain '-'",
    "–": "'to' for a range, or a plain '-' for a negative number",
    "—": "'to' for a range, or a plain '-' for a negative number",
    "″": "in for inches",
    "”": "in for inches",
    "“": "in for inches",
    "′": "ft for feet",
    "’": "ft for feet",
    "²": "a plain 2, as in m2",
    "×": "the number with an exponent, as in 1.2e3",
    "·": "a point for the decimals",
}


def screen(text: str) -> str:
    """The text without the space around it, once nothing in it can be taken for something else.

    Raises
    ------
    UserFault
        If it is empty, or holds a comma, a quote mark, a fraction or a character that is not plain.

    >>> screen("  12 mm ")
    '12 mm'
    """
    text = text.strip(" \t\r\n")
    if not text:
        raise UserFault("nothing is given", allowed="a number and its unit are needed, like '12 mm'")
    for character in text:
        if not (" " <= character <= "~" or character in _WELCOME):
            _refuse_character(text, character)
    if "," in text:
        _refuse_comma(text)
    if '"' in text or "'" in text:
        raise UserFault(f"{text!r} has a quote mark", allowed="write in for inches and ft for feet")
    if fraction := re.search(r"(?:(\d+)\s+)?(\d+)\s*/\s*(\d+)", text):
        _refuse_fraction(text, fraction)
    return text


def _refuse_character(text: str, character: str) -> None:
    name = unicodedata.name(character, f"U+{ord(character):04X}").lower()
    instead = _INSTEAD.get(character)
    if instead is None and character.isspace():
        instead = "a plain space"
    if instead is None and unicodedata.numeric(character, None) is not None:
        instead = "plain digits"
    seen = f"{text!r} has a character that is not read here, {name}"
    raise UserFault(seen, allowed=f"write {instead or 'plain letters and digits'}")


def _refuse_comma(text: str) -> None:
    raise UserFault(f"'{text}' has a comma", allowed=f"decimals take a point, thousands no mark{_without_commas(text)}")


def _without_commas(text: str) -> str:
    """What to write instead, where that is clear: both readings of ``1,500``, one of ``1,5`` and ``1,500.5``."""
    numbers = re.findall(r"[\d.,]+", text)
    if any(re.search(r"\.\d*,|,\d*,(?!\d{3})|,(?!\d)", number) for number in numbers):
        return ""
    point, joined = text.replace(",", "."), text.replace(",", "")
    thousands = [number for number in numbers if re.fullmatch(r"\d{1,3}(,\d{3})+(\.\d+)?", number)]
    if any("," in number and number not in thousands for number in numbers):
        return f": write '{point}'" if text.count(",") == len([n for n in numbers if "," in n]) else ""
    several = any(number.count(",") > 1 or "." in number for number in thousands)
    return f": write '{joined}'" if several else f": write '{joined}' or '{point}'"


def _refuse_fraction(text: str, fraction: re.Match[str]) -> None:
    whole, above, below = fraction.groups()
    fix = "write it as a decimal"
    if int(below[:9]) != 0 and len(below) < 9 and len(above) < 9:
        fix += f": {float(int((whole or '0')[:9]) + Fraction(int(above), int(below))):.10g}"
    raise UserFault(f"'{text}' has a fraction", allowed=fix)
