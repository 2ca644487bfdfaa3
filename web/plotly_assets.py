"""What a page must hold so that Plotly works under a content security policy without inline styles.

Plotly puts its own rules into the style sheet of the element whose id is `GLOBAL_SHEET`.  Where a `<link>` of ours has
that id, the rules go into its sheet by `insertRule`, which the policy allows; without it Plotly makes a `<style>`,
which the policy refuses.  The wheel also brings a map library that makes a `<style>` of its own unless an element
with a certain id is there; that id changes with the version, so it is read from the installed file.
"""

from __future__ import annotations

import re
from functools import cache

from web.assets import asset

SCRIPT = "vendor/plotly.min.js"
GLOBAL_SHEET = "plotly.js-style-global"

_GUARDED_STYLE = re.compile(r'getElementById\("([^"]+)"\)\)\{var (\w+)=document\.createElement\("style"\);\2\.id="\1"')


@cache
def placeholder_ids() -> tuple[str, ...]:
    """Ids of elements whose mere presence keeps the installed Plotly from making a `<style>`."""
    found = asset(SCRIPT)
    if found is None:
        return ()
    return tuple(dict.fromkeys(match[1] for match in _GUARDED_STYLE.finditer(found.read_text(encoding="utf-8"))))
