"""The reading of a document with its necessary conditions in symbols, as a worker makes it for the composer.

Nobody can say beforehand how large the conditions of a formula grow, so they are not derived in the web process.
"""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping
from typing import Any

from service.assemble import assemble
from service.reading import read_back, with_necessary
from service.spec import read


def understand(
    head: Mapping[str, Any], body: bytes, report: Callable[[dict[str, Any]], None], stop: Callable[[], bool]
) -> tuple[Mapping[str, Any], bytes]:
    """The reading of the document `body` as JSON text; conditions beyond `head["seconds"]` are left out with a note.

    Called by a slot's child.  Raises Refused.
    """
    document = read(body)
    problem = assemble(document)
    reading = with_necessary(read_back(problem, document), problem, head["seconds"])
    return {}, json.dumps(reading, ensure_ascii=False, allow_nan=False).encode("utf-8", "backslashreplace")
