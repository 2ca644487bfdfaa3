"""A solution as the result document of `DEVELOPERS.md`."""

from service.archive.document import result_document

__all__ = ["result_document"]
