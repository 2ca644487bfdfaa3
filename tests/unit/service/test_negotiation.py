"""Accept and Prefer, read as their standards say."""

import pytest

from service.negotiation import Preferences, best, preferences, wants_page

OFFERS = ("text/csv", "application/json")


@pytest.mark.parametrize(
    ("accept", "chosen"),
    [
        ("", "text/csv"),
        ("*/*", "text/csv"),
        ("application/json", "application/json"),
        ("application/*", "application/json"),
        ("text/csv;q=0.2, application/json;q=0.4", "application/json"),
        ("*/*;q=0.1, application/json", "application/json"),
        ("text/csv;q=0, */*", "application/json"),  # the most exact range decides
        ("TEXT/CSV ; q=1.0", "text/csv"),
        ("image/png", None),
        ("*/*;q=0", None),
        ("text/csv;q=nonsense", None),
        ("text/csv;q=nan, application/json;q=0.1", "application/json"),
    ],
)
def test_the_best_offer(accept, chosen):
    assert best(accept, OFFERS) == chosen


@pytest.mark.parametrize(
    ("accept", "page"),
    [
        ("text/html,application/xhtml+xml,application/xml;q=0.9,*/*;q=0.8", True),
        ("text/html", True),
        ("*/*", False),
        ("", False),
        ("application/json, text/html;q=0.5", False),
        ("text/html;q=0", False),
    ],
)
def test_only_a_browser_gets_pages(accept, page):
    assert wants_page(accept) is page


@pytest.mark.parametrize(
    ("prefer", "wish"),
    [
        ("", Preferences()),
        ("wait=10", Preferences(wait=10)),
        ("wait=10, respond-async", Preferences(wait=10, respond_async=True)),
        ("respond-async; foo=bar, return=representation", Preferences(respond_async=True, whole=True)),
        ('Wait="5"', Preferences(wait=5)),
        ("wait=5, wait=7", Preferences(wait=5)),  # the first one counts (section 2)
        ("wait=99", Preferences(wait=60)),
        ("wait=-1", Preferences()),
        ("wait=1e3", Preferences()),
        ("wait=٣", Preferences()),
        ("return=minimal", Preferences()),
        (",;=,,", Preferences()),
    ],
)
def test_preferences(prefer, wish):
    assert preferences(prefer, longest=60) == wish
