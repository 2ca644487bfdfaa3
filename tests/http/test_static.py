"""Static files: compressed, kept for ever under the address of their content, from our folder and two packages."""

import gzip

import pytest

from web import links
from web.assets import asset

FILES = ["css/tokens.css", "js/scheme.js", "mark.svg", "vendor/plotly.min.js", "vendor/math.ttf"]


@pytest.mark.parametrize("path", FILES)
def test_the_address_of_the_content_is_kept_for_ever(client, path):
    answer = client.get(links.static(path))
    assert answer.content == asset(path).read_bytes()
    assert "immutable" in answer.headers["cache-control"]
    assert "max-age=31536000" in answer.headers["cache-control"]


@pytest.mark.parametrize("address", ["/static/css/tokens.css", "/static/css/tokens.css?v=000000000000"])
def test_an_address_that_says_nothing_of_the_content_is_asked_again(client, address):
    answer = client.get(address)
    assert answer.headers["cache-control"] == "no-cache"
    tag = answer.headers["etag"]
    assert client.get(address, headers={"if-none-match": tag}).status_code == 304


@pytest.mark.parametrize("path", [path for path in FILES if path.startswith("vendor")])
def test_large_files_travel_compressed(client, path):
    with client.stream("GET", links.static(path), headers={"accept-encoding": "gzip"}) as answer:
        raw = b"".join(answer.iter_raw())
    assert answer.headers["content-encoding"] == "gzip"
    assert "Accept-Encoding" in answer.headers["vary"]
    assert gzip.decompress(raw) == asset(path).read_bytes()
    plain = client.get(links.static(path), headers={"accept-encoding": "identity"})
    assert "content-encoding" not in plain.headers
    assert plain.headers["etag"] != answer.headers["etag"]


def test_the_fonts_licence_allows_to_serve_it():
    """The file is served as it is, with its notice inside: the licence asks for both."""
    notice = "SIL Open Font License, Version 1.1".encode("utf-16-be")
    assert notice in asset("vendor/math.ttf").read_bytes()
