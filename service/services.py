"""What a running application consists of: made when it starts, closed when it ends, handed to every route."""

from __future__ import annotations

import shutil
from collections.abc import Mapping
from dataclasses import dataclass

from service.dispatch import Dispatcher
from service.engine.records import Engine
from service.metrics import Metrics
from service.run import StoreFullError
from service.settings import Settings
from service.store import Store


@dataclass(frozen=True, slots=True)
class Services:
    """The store (the truth), the dispatcher (the work), the figures, the settings."""

    settings: Settings
    store: Store
    dispatcher: Dispatcher
    metrics: Metrics

    @classmethod
    def start(cls, settings: Settings, metrics: Metrics | None = None, engine: Engine | None = None) -> Services:
        """Open the database and begin to solve; raises what the store and the dispatcher raise.

        `engine` may be one that is prepared already; from here on it is closed with the services.
        """
        store = Store(settings.database_url)
        services = cls(settings, store, Dispatcher(store, settings, engine), metrics or Metrics())
        services.metrics.watch("runs", "Runs in each state", "state", services._runs)
        services.metrics.watch("slots", "Slots for runs", "kind", services._slots)
        try:
            services.dispatcher.start()
        except BaseException:
            store.close()
            raise
        return services

    def close(self) -> None:
        """Stop solving; runs in the middle go on at the next start."""
        self.dispatcher.close()
        self.store.close()

    def workers_alive(self) -> int:
        """Workers that stand ready or solve."""
        return self.dispatcher.capacity().alive

    def check_room(self) -> None:
        """Raises `StoreFullError` where the disk has less free space than the reserve."""
        free = shutil.disk_usage(self.settings.data).free
        if free < self.settings.disk_reserve_mb * 2**20:
            raise StoreFullError(f"{free // 2**20} MB are free, {self.settings.disk_reserve_mb} MB are kept in reserve")

    def _runs(self) -> Mapping[str, float]:
        return {state.value: count for state, count in self.store.counts().items()}

    def _slots(self) -> Mapping[str, float]:
        capacity = self.dispatcher.capacity()
        return {"all": capacity.slots, "free": capacity.free, "alive": capacity.alive}
