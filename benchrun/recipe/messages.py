"""Messages about names that nothing has."""

from __future__ import annotations

import difflib
from collections.abc import Iterable


def no_such(what: str, name: str, known: Iterable[str]) -> str:
    """Return "there is no step 'raed'. Did you mean 'read'? ..."; what there is comes with it."""
    names = list(known)
    near = difflib.get_close_matches(name, names, n=1)
    meant = f" Did you mean '{near[0]}'?" if near else ""
    return f"there is no {what} '{name}'.{meant} There is: {', '.join(names) or 'none'}."


def nearest_first(name: str, known: Iterable[str]) -> str:
    """Return the known names for a message, those that look like `name` first."""
    names = list(known)
    near = difflib.get_close_matches(name, names, n=3)
    return ", ".join([*near, *(other for other in names if other not in near)]) or "nothing"
