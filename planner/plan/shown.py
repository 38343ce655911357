"""Keys and values of a plan as they may stand in a message: short, in one line, printable."""

import datetime
import difflib
import json
import re
from collections.abc import Iterable
from typing import Any

LONGEST_SHOWN = 60


def printable(text: str, longest: int = LONGEST_SHOWN) -> str:
    """The text in one line without characters that a terminal would obey, cut where too long."""
    cut = text if len(text) <= longest else text[: longest - 3] + "..."
    return "".join(
        character if character.isprintable() else f"\\u{ord(character):04x}" for character in cut
    )


def shown(value: Any) -> str:
    """A value as it stands in the file, as far as it is short."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        cut = value if len(value) <= LONGEST_SHOWN else value[: LONGEST_SHOWN - 3] + "..."
        return printable(json.dumps(cut, ensure_ascii=False), 10 * LONGEST_SHOWN)
    if isinstance(value, int):
        return str(value) if abs(value) < 10**20 else "a number of more than 20 digits"
    if isinstance(value, float):
        return f"{value:.10g}"
    if isinstance(value, datetime.datetime):
        return f"{value.isoformat()} (a date with a time)"
    if isinstance(value, datetime.date | datetime.time):
        return value.isoformat()
    if isinstance(value, list):
        if all(isinstance(element, dict) for element in value) and value:
            return f"{len(value)} tables"
        return f"a list of {len(value)}" if value else "an empty list"
    if isinstance(value, dict):
        return "a table" if value else "an empty table"
    return type(value).__name__


def shown_key(key: str | int) -> str:
    """One part of a key path, quoted where TOML would need it."""
    text = str(key)
    if re.fullmatch(r"[A-Za-z0-9_-]{1,64}", text):
        return text
    return shown(text)


def nearest(word: str, known: Iterable[str]) -> str | None:
    """The known word that is most like ``word``, if one is."""
    by_lower = {known_word.lower(): known_word for known_word in known}
    matches = difflib.get_close_matches(word[:64].lower(), by_lower, n=1, cutoff=0.6)
    return by_lower[matches[0]] if matches else None
