"""A server without HTTP, for the test that kills it: reads documents, prints the id of each run it accepted.

python serving.py DIRECTORY
"""

import sys
from pathlib import Path

from service.dispatch import Dispatcher
from service.run import new_run
from service.settings import Settings
from service.store import Store
from service.workers import workers

settings = Settings(data=Path(sys.argv[1]), workers=2)
store = Store(settings.database_url)
dispatcher = Dispatcher(store, settings, workers(settings, job="slot_jobs:act"))
dispatcher.start()
print("ready", flush=True)
for line in sys.stdin:
    print(dispatcher.submit(new_run("", ""), line).id, flush=True)
