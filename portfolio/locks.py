"""One writer at a time: a lock file beside the store, held by the operating system.

The kernel frees the lock when its holder dies, however it dies, so there is nothing to clean up after a crash. The
content only names the holder for the message.
"""

from __future__ import annotations

import fcntl
import os
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path

from portfolio.errors import StoreBusyError, StoreError


@contextmanager
def hold(path: Path) -> Iterator[None]:
    """Hold `<path>.lock` for the time of the block; `StoreBusyError` names the holder when another process has it."""
    lock = path.with_name(path.name + ".lock")
    try:
        handle = lock.open("a+", encoding="utf-8")
    except OSError as error:
        raise StoreError(f"{lock}: {error.strerror}. The folder of the store must be writable.") from error
    with handle:
        try:
            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            handle.seek(0)
            holder = handle.read().strip() or "another process"
            raise StoreBusyError(f"{path.name} is in use by {holder}. Wait until that run has ended.") from None
        handle.seek(0)
        handle.truncate()
        handle.write(f"process {os.getpid()} since {datetime.now(UTC):%Y-%m-%d %H:%M:%S} UTC")
        handle.flush()
        yield
        # Emptied, not removed: removing would let two processes lock two files of one name.
        handle.seek(0)
        handle.truncate()
