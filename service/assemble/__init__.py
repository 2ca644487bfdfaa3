"""From a `Document` to a `Problem`: names resolved, units converted to SI, orders found, conditions counted."""

from service.assemble.assembly import assemble

__all__ = ["assemble"]
