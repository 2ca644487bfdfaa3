"""The snippets send exactly the document, whatever is in it."""

import ast
import json
import subprocess

import pytest

from web import snippets
from web.form.pretty import pretty

DOCUMENTS = [
    pytest.param({"format": 1, "title": "plain"}, id="plain"),
    pytest.param({"title": 'it\'s $HOME `id` "quoted" \\ and \\" """ end\\'}, id="what a shell would read"),
    pytest.param({"title": "PROBLEM\nPROBLEM\n", "": ["", ""]}, id="the end mark and empty texts"),
    pytest.param({"title": "Δφ ≤ π"}, id="letters of the world"),
]


@pytest.mark.parametrize("document", DOCUMENTS)
def test_a_shell_hands_over_the_document(document, tmp_path):
    (tmp_path / "curl").write_text('#!/bin/sh\nfor word; do echo "$word"; done >"$0.words"\nexec cat\n')
    (tmp_path / "curl").chmod(0o755)
    sent = subprocess.run(
        ["/bin/sh", "-c", snippets.curl(pretty(document), "http://127.0.0.1:8000/")],
        env={"PATH": f"{tmp_path}:/usr/bin:/bin"}, capture_output=True, text=True, check=True, encoding="utf-8",
    )  # fmt: skip
    assert json.loads(sent.stdout) == document
    assert (tmp_path / "curl.words").read_text().split()[-1] == "http://127.0.0.1:8000/api/v1/runs"


@pytest.mark.parametrize("document", DOCUMENTS)
def test_the_program_holds_the_document(document):
    program = ast.parse(snippets.python(pretty(document), "http://127.0.0.1:8000"))
    (text,) = (
        node.value.value for node in program.body if isinstance(node, ast.Assign) and node.targets[0].id == "PROBLEM"
    )
    assert json.loads(text) == document
