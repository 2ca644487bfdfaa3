"""Templates and contexts fit: what a template uses is declared and told, what is declared is used."""

import importlib
import pkgutil
import re
from dataclasses import fields

import pytest
from jinja2 import meta

import web.pages
from web.assets import STATIC
from web.pages.page import Page
from web.render import TEMPLATES, environment

for module in pkgutil.iter_modules(web.pages.__path__):
    importlib.import_module(f"web.pages.{module.name}")
PAGES = sorted(Page.__subclasses__(), key=lambda page: page.template)
GLOBAL = {"links", "here"}
GIVEN_BY_THE_BASE = {"title"}


def used(name):
    """Names that a template takes from its context, with those of the templates it includes or extends."""
    source = (TEMPLATES / name).read_text(encoding="utf-8")
    tree = environment().parse(source)
    set_here = set(re.findall(r"{%-?\s*(?:set|for)\s+(\w+)", source))
    for given in re.findall(r"{%-?\s*with\s(.*?)%}", source):
        set_here |= set(re.findall(r"(\w+)\s*=[^=]", given))
    own = meta.find_undeclared_variables(tree) - set_here
    for part in meta.find_referenced_templates(tree):
        own |= used(part) - set_here
    return own


@pytest.mark.parametrize("page", PAGES, ids=lambda page: page.template)
def test_a_template_uses_what_its_context_declares(page):
    declared = {field.name for field in fields(page)}
    assert used(page.template) - GLOBAL <= declared
    assert declared <= used(page.template) | GIVEN_BY_THE_BASE


@pytest.mark.parametrize("page", PAGES, ids=lambda page: page.template)
def test_every_field_of_a_context_is_explained(page):
    assert [field.name for field in fields(page) if not field.metadata.get("help")] == []


@pytest.mark.parametrize("page", PAGES, ids=lambda page: page.template)
def test_a_template_names_its_context(page):
    assert page.__name__ in (TEMPLATES / page.template).read_text(encoding="utf-8").splitlines()[0]


@pytest.mark.parametrize("path", sorted(TEMPLATES.glob("*.html")), ids=lambda path: path.name)
def test_no_template_needs_an_exception_from_the_security_policy(path):
    """No inline style, no inline code, no event attribute, nothing from elsewhere."""
    text = path.read_text(encoding="utf-8")
    assert not re.search(r"\sstyle\s*=|<style|\son[a-z]+\s*=|javascript:|https?://", text)
    for attributes in re.findall(r"<script([^>]*)>", text):
        assert "src=" in attributes or 'type="application/json"' in attributes


@pytest.mark.parametrize("path", sorted((STATIC / "css").glob("*.css")), ids=lambda path: path.name)
def test_a_style_sheet_uses_only_names_that_are_declared(path):
    declared = {
        name
        for sheet in (STATIC / "css").glob("*.css")
        for name in re.findall(r"(--[\w-]+)\s*:", sheet.read_text(encoding="utf-8"))
    }
    assert set(re.findall(r"var\((--[\w-]+)", path.read_text(encoding="utf-8"))) <= declared


def test_every_template_belongs_to_a_page():
    def reached(name):
        tree = environment().parse((TEMPLATES / name).read_text(encoding="utf-8"))
        return {name}.union(*(reached(part) for part in meta.find_referenced_templates(tree)))

    assert {path.name for path in TEMPLATES.glob("*.html")} == set().union(*(reached(page.template) for page in PAGES))
