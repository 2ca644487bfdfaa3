"""Whatever the tests solve is solved with one thread, as in the service; this file is read before NumPy is loaded."""

import os

from hypothesis import HealthCheck, settings

from service.threads import ONE_THREAD

os.environ.update(ONE_THREAD)

# A busy machine makes a test slow, not red.
settings.register_profile("patient", deadline=None, suppress_health_check=[HealthCheck.too_slow])
settings.load_profile("patient")
