"""Which files changed and are settled, from which offset: scans are the truth, events only wake.

The daemon's loop::

    landing = Landing(plan, store.sources())
    watcher = Watcher(landing, plan.landing.watch)
    watcher.start()
    while not stop.is_set():
        watcher.relay()
        for batch in landing.visit(time.time()):
            store.take(batch)  # runs and batch.source in one transaction
        if not watcher.tend(time.time()):
            ...  # watching cannot be restored: end with 70
        watcher.wake.wait(min(10.0, landing.wait_s(time.time())))
    watcher.stop()

`gather` is `for batch in Landing(plan, sources, settle_all=True).scan(time.time())`.
"""

from auditd.landing.files import Progress
from auditd.landing.landing import Landing, Waiting
from auditd.landing.watcher import Watcher

__all__ = ["Landing", "Progress", "Waiting", "Watcher"]
