"""Addresses are made in one place, escaped, and change with the content of a file."""

import re

import pytest

from web import links
from web.assets import STATIC, asset


def test_names_and_queries_are_escaped():
    assert links.run("a/b?c") == "/runs/a%2Fb%3Fc"
    assert links.runs(state="failed", after="x&y=") == "/runs?state=failed&after=x%26y%3D"
    assert links.compose() == "/compose"


@pytest.mark.parametrize("path", ["css/tokens.css", "vendor/plotly.min.js", "vendor/math.ttf"])
def test_a_static_address_carries_the_fingerprint_of_the_file(path):
    assert re.fullmatch(rf"/static/{re.escape(path)}\?v=[0-9a-f]{{12}}", links.static(path))


def test_a_file_that_is_missing_is_noticed_when_the_page_is_made():
    with pytest.raises(LookupError, match=r"there is no static file 'css/none\.css'"):
        links.static("css/none.css")


@pytest.mark.parametrize("path", ["../render.py", "css/../../render.py", "/etc/passwd", "", "css", "vendor/none"])
def test_no_path_leads_out_of_the_static_files(path):
    assert asset(path) is None


def test_style_sheets_name_only_files_that_exist():
    for sheet in (STATIC / "css").glob("*.css"):
        for target in re.findall(r'url\("([^"]+)"\)', sheet.read_text(encoding="utf-8")):
            assert asset(target.removeprefix("../")), f"{sheet.name} names {target}"


def test_modules_import_only_files_that_exist():
    for module in (STATIC / "js").rglob("*.js"):
        for target in re.findall(r'from "(\.[^"]+)"|import "(\.[^"]+)"', module.read_text(encoding="utf-8")):
            path = module.parent / (target[0] or target[1])
            assert path.is_file(), f"{module.name} imports {path.name}"
