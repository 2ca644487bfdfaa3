"""Where the files below `/static/` lie: our own, and two that come with installed packages."""

from __future__ import annotations

from functools import cache
from importlib.util import find_spec
from pathlib import Path

STATIC = Path(__file__).parent / "static"

VENDORED = {
    "vendor/plotly.min.js": ("plotly", "package_data/plotly.min.js"),
    "vendor/math.ttf": ("ziamath", "fonts/STIXTwoMath-Regular.ttf"),  # roots and brackets stretch only with its table
}
"""Path below `/static/` -> package and the file within it."""


@cache
def asset(path: str) -> Path | None:
    """The file served at `/static/{path}`; None where there is none.  Never leaves the two places."""
    if path in VENDORED:
        package, inside = VENDORED[path]
        spec = find_spec(package)
        if spec is None or not spec.submodule_search_locations:
            return None
        found = Path(spec.submodule_search_locations[0]) / inside
    else:
        found = (STATIC / path).resolve()
        if not found.is_relative_to(STATIC.resolve()):
            return None
    return found if found.is_file() else None
