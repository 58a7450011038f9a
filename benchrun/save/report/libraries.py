"""What a report needs beside benchrun itself: a template engine that escapes, and a plotting script to put inside."""

from __future__ import annotations

import base64
import gzip
from importlib.util import find_spec

from benchrun.errors import InputError

#: Packages of the extra `report`.
LIBRARIES = ("jinja2", "plotly")
ADVICE = "`pip install 'benchrun[report]'` installs what it needs"


def absent_libraries() -> tuple[str, ...]:
    """Return which packages a report needs and does not find."""
    return tuple(name for name in LIBRARIES if find_spec(name) is None)


def require_libraries() -> None:
    """Raise InputError that says what to install where something is absent."""
    if absent := absent_libraries():
        raise InputError(f"a report needs {' and '.join(absent)}, not installed here. {ADVICE}.")


def plotting_script() -> str:
    """Return the plotting library's script as gzip in base64: under half of its size, the same for the same version."""
    from plotly.offline import get_plotlyjs

    return base64.b64encode(gzip.compress(get_plotlyjs().encode(), 9, mtime=0)).decode("ascii")
