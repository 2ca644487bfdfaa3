"""Whatever the tests solve is solved with one thread, as in the service; this file is read before NumPy is loaded."""

import os

from service.threads import ONE_THREAD

os.environ.update(ONE_THREAD)
