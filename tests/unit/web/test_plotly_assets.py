"""What the pages assume of the installed plotting script."""

from __future__ import annotations

from web.assets import asset
from web.plotly_assets import GLOBAL_SHEET, SCRIPT, placeholder_ids


def test_the_script_still_looks_for_the_sheet_that_the_page_gives_it():
    text = asset(SCRIPT).read_text(encoding="utf-8")
    prefix, name = GLOBAL_SHEET.rsplit("-", 1)
    assert f'"{prefix}-"+' in text and f'"{name}"' in text


def test_every_style_that_the_script_makes_by_itself_is_kept_back():
    """Were one missed, the content security policy would refuse it and each page would complain on the console."""
    text = asset(SCRIPT).read_text(encoding="utf-8")
    styles = text.count('createElement("style")')
    by_sheet = text.count(f'"{GLOBAL_SHEET.rsplit("-", 1)[0]}-"+') // 2  # one place makes it, one removes it
    assert len(placeholder_ids()) == styles - by_sheet > 0
