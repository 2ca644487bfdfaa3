"""From the body of a request to a durable run."""

from __future__ import annotations

from hashlib import sha256

from service.engine.records import packed
from service.errors import Fault
from service.run import Run, new_run
from service.services import Services

LONGEST_KEY = 200


def accept(services: Services, body: bytes, key: str | None = None) -> tuple[Run, bool]:
    """Check a document and keep it; say also whether the run is new (False: the earlier one of the same key).

    Raises `Refused` for the document, `IdempotencyError`, `QueueFullError` and `StoreError` where it cannot be kept.
    """
    from service.assemble import assemble  # see `service.later`
    from service.spec import read

    document = read(body)
    problem = assemble(document)
    services.check_room()
    run = new_run(
        document.title,
        document.canonical_hash(),
        time_limit=document.solve.time_limit,
        key=key,
        key_hash=None if key is None else sha256(body).hexdigest(),
    )
    kept = services.dispatcher.submit(run, body.decode("utf-8-sig"), packed((document, problem)))
    return kept, kept.id == run.id


def idempotency_key(header: str | None) -> str | None:
    """The key in the header, with or without the quotes of a structured field (RFC 8941, section 3.3.3)."""
    if header is None:
        return None
    key = header.strip()
    if len(key) > 1 and key[0] == key[-1] == '"':
        key = key[1:-1].replace('\\"', '"').replace("\\\\", "\\")
    if not key or len(key) > LONGEST_KEY:
        raise Fault("parameters", f"Idempotency-Key has to hold 1 to {LONGEST_KEY} characters.")
    return key
