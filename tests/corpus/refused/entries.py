"""The documents that have to be refused: one table per stage, one JSON object per line.

An entry has `name`, what is expected (`code`, `pointer`, and `marked`, the characters under the span), and the
document: `body` as text, or `patch`, merged (RFC 7396) into the base document of that name in `bases.json`, and `set`,
values by JSON pointer, which reach into lists (a last step beyond the list appends).
"""

import json
from dataclasses import dataclass
from pathlib import Path

HERE = Path(__file__).parent
STAGES = ("json", "schema", "names", "formulas", "units", "conditions")
BASES = json.loads((HERE / "bases.json").read_text())


@dataclass(frozen=True)
class Entry:
    name: str
    body: bytes
    stage: str
    code: str
    pointer: str
    marked: str | None = None

    @property
    def id(self) -> str:
        return f"{self.stage}: {self.name}"


def merged(document, patch):
    """RFC 7396: objects are merged, null removes, everything else replaces."""
    if not isinstance(document, dict) or not isinstance(patch, dict):
        return patch
    result = dict(document)
    for name, value in patch.items():
        if value is None:
            result.pop(name, None)
        else:
            result[name] = merged(result.get(name, {}), value)
    return result


def _body(entry) -> bytes:
    if "body" in entry:
        return entry["body"].encode()
    document = merged(BASES[entry["base"]], entry.get("patch", {}))
    if "set" in entry:
        document = json.loads(json.dumps(document))  # the base itself stays as it is
    for pointer, value in entry.get("set", {}).items():
        *way, last = pointer.split("/")[1:]
        part = document
        for step in way:
            part = part[int(step)] if isinstance(part, list) else part.setdefault(step, {})
        if not isinstance(part, list):
            part[last] = value
        elif int(last) < len(part):
            part[int(last)] = value
        else:
            part.append(value)
    return json.dumps(document, ensure_ascii=False).encode()


def _long_documents():
    """Too much of something, built here because it is long."""
    much = "+".join(["x"] * 900)
    doubling = {"d0": "x(0)"} | {f"d{n}": f"d{n - 1} + d{n - 1}" for n in range(1, 60)}
    yield Entry("300 KiB of spaces", b" " * 300 * 1024, "size", "document-too-large", "")
    yield Entry("not in UTF-8", '{"title": "Größe"}'.encode("latin-1"), "json", "not-utf-8", "")
    yield Entry("UTF-16", '{"format": 1}'.encode("utf-16"), "json", "not-utf-8", "")
    for name, patch, pointer in (
        ("20 long formulas", {"where": {f"w{n}": much for n in range(20)}}, ""),
        ("60 KB of formulas", {"constraints": [much + " <= 1"] * 34}, ""),
        ("abbreviations that double", {"where": doubling, "endpoints": ["d59 = 1"]}, "/where"),
    ):
        body = json.dumps(merged(BASES["plain"], patch)).encode()
        yield Entry(name, body, "size", "problem-too-large", pointer)


def entries() -> list[Entry]:
    """All of them."""
    found = list(_long_documents())
    for stage in STAGES:
        for line in (HERE / f"{stage}.jsonl").read_text().splitlines():
            entry = json.loads(line)
            found.append(
                Entry(entry["name"], _body(entry), stage, entry["code"], entry["pointer"], entry.get("marked"))
            )
    return found
