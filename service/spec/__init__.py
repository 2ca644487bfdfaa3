"""From the bytes of a problem document to a checked, typed record, or to all complaints with their places."""

from service.spec.model import Document, TablePart
from service.spec.reader import LARGEST_BODY, read

__all__ = ["LARGEST_BODY", "Document", "TablePart", "read"]
