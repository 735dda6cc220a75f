"""How faults are worded: what was got, the nearest valid word, and where in the plan a thing stands."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Sequence

SHOWN_LENGTH = 60  # characters of a wrong value that are shown; enough to recognise it, short enough for one line


def shown(value: object) -> str:
    """Return a value as the plan's author would write it, cut to `SHOWN_LENGTH`.

    >>> shown("down"), shown(True), shown((1, "a")), shown({"a": 1})
    ("'down'", 'true', "[1, 'a']", 'a table')
    """
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, dict):
        return "a table" if value else "an empty table"
    if isinstance(value, (list, tuple)):
        if value and all(isinstance(item, dict) for item in value):
            return f"a list of {len(value)} table{'s' if len(value) > 1 else ''}"
        return _cut("[" + ", ".join(shown(item) for item in value) + "]")
    if isinstance(value, str):
        return "empty text" if not value else "'" + _cut(value) + "'"
    return _cut(str(value))


def nearest(word: object, known: Iterable[str], *, cutoff: float = 0.6) -> str:
    """Return " Did you mean '...'?" for the known word most like `word`, or "" where none is near."""
    found = nearest_word(word, known, cutoff=cutoff)
    return "" if found is None else f" Did you mean '{found}'?"


def nearest_word(word: object, known: Iterable[str], *, cutoff: float = 0.6) -> str | None:
    """Return the known word most like `word`, or None where none is near."""
    if not isinstance(word, str):
        return None
    by_folded = {name.casefold().strip(): name for name in known}
    found = difflib.get_close_matches(word.casefold().strip(), list(by_folded), n=1, cutoff=cutoff)
    return by_folded[found[0]] if found else None


def listed(words: Sequence[str], *, last: str = "or", most: int = 8) -> str:
    """Return quoted words as a list in a sentence: "'a', 'b' or 'c'", at most `most` of them.

    >>> listed(["a", "b", "c"])
    "'a', 'b' or 'c'"
    """
    quoted = [f"'{word}'" for word in words]
    if len(quoted) > most:
        return ", ".join(quoted[:most]) + f" {last} {len(quoted) - most} more"
    if len(quoted) < 2:
        return "".join(quoted)
    return ", ".join(quoted[:-1]) + f" {last} {quoted[-1]}"


def item(section: str, index: int, name: object = "") -> str:
    """Return where an item of a list stands, counted from 1, with its name: `endpoint[3] "Pain at rest"`."""
    return f"{section}[{index + 1}]" + (f' "{name}"' if isinstance(name, str) and name else "")


def _cut(text: str) -> str:
    text = " ".join(text.split()) if "\n" in text else text
    return text if len(text) <= SHOWN_LENGTH else text[: SHOWN_LENGTH - 3] + "..."
