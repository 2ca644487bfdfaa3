"""How lab software sends exactly this problem: a shell line and a program of the standard library alone."""

from __future__ import annotations

from web import links


def curl(text: str, base_url: str) -> str:
    """A shell command that posts the document and waits for the result.

    The document goes into a quoted here-document, in which a shell replaces nothing.
    """
    return (
        f"curl --silent --show-error --json @- --header 'Prefer: wait=10' \\\n"
        f"  {base_url.rstrip('/')}{links.API_RUNS} <<'PROBLEM'\n{text.strip()}\nPROBLEM\n"
    )


def python(text: str, base_url: str) -> str:
    """A Python program that posts the document, waits for the end of the run and saves the table.

    JSON never has three quotation marks in a row and never ends in a backslash, so a raw string holds it as it is.
    """
    base = base_url.rstrip("/")
    return f'''import json
import time
import urllib.request

SERVICE = "{base}"
PROBLEM = r"""
{text.strip()}
"""


def ask(path, body=None):
    request = urllib.request.Request(SERVICE + path, body, {{"Content-Type": "application/json", "Prefer": "wait=10"}})
    with urllib.request.urlopen(request) as answer:
        return answer.read()


run = json.loads(ask("{links.API_RUNS}", PROBLEM.encode()))
while run["state"] in ("waiting", "solving"):
    time.sleep(1)
    run = json.loads(ask("{links.API_RUNS}/" + run["id"]))

print(run["verdict"], run["value"], "+/-", run["value_error"])
with open("table.csv", "wb") as file:
    file.write(ask("{links.API_RUNS}/" + run["id"] + "/table.csv?rows=201"))
'''
