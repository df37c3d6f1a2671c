"""Where supervisors run: threads of this process, or a cluster of machines that see the same folder."""

import importlib
import logging
import threading
from concurrent.futures import CancelledError, Executor, Future, ThreadPoolExecutor
from typing import Any, Protocol

from ledgersolve.service.disk import Disk
from ledgersolve.service.order import Order, Report
from ledgersolve.service.supervise import supervise

logger = logging.getLogger(__name__)
_CONNECT_SECONDS = 10.0


class Pool(Protocol):
    """Takes orders; a report comes back by a future."""

    def submit(self, order: Order) -> "Future[Report]":
        """Hand an order over. Raises OSError where that is not possible now."""

    def halt(self) -> None:
        """End everything that runs in this process at once."""

    def close(self) -> None:
        """Let go of threads and connections."""


class LocalPool:
    """Supervisors as threads; each starts a child process of its own.

    Parameters
    ----------
    executor
        Any executor; a pool of ``places`` threads where None.
    disk
        The served folder's file system.
    """

    def __init__(self, places: int, executor: Executor | None = None, disk: Disk | None = None) -> None:
        self._halt = threading.Event()
        self._disk = disk
        self._executor = executor or ThreadPoolExecutor(places, thread_name_prefix="supervisor")

    def submit(self, order: Order) -> "Future[Report]":
        """Hand an order over."""
        return self._executor.submit(supervise, order, self._halt, self._disk)

    def halt(self) -> None:
        """End everything at once."""
        self._halt.set()

    def close(self) -> None:
        """Wait for the threads; after ``halt`` that takes a second."""
        self._executor.shutdown(wait=True, cancel_futures=True)


class ClusterPool:
    """Supervisors as tasks of a dask cluster whose workers see the served folder at the same path.

    ``pure=False``, so that two orders never share a result; no retries, because an attempt that failed is
    the folder's to count. The scheduler runs a task again whose worker died: it answers nothing by itself,
    so that is harmless.
    """

    def __init__(self, address: str) -> None:
        self._address = address
        self._client: Any = None
        self._executor: Executor | None = None

    def submit(self, order: Order) -> "Future[Report]":
        """Hand an order over; connects anew after an outage of the scheduler."""
        try:
            return self._connected().submit(supervise, order)
        except (RuntimeError, ValueError, TimeoutError) as error:
            self.close()
            raise OSError(f"the cluster {self._address} does not answer ({error})") from error
        except OSError:
            self.close()
            raise

    def _connected(self) -> Executor:
        if self._executor is not None and self._client.status == "running":
            return self._executor
        self.close()
        distributed: Any = importlib.import_module("distributed")  # an extra, loaded only where asked for
        self._client = distributed.Client(self._address, timeout=_CONNECT_SECONDS, set_as_default=False)
        executor: Executor = self._client.get_executor(pure=False, retries=0)
        self._executor = executor
        return executor

    def halt(self) -> None:
        """Nothing runs in this process; tasks elsewhere see the stop files."""

    def close(self) -> None:
        """Let go of the connection."""
        client, self._client, self._executor = self._client, None, None
        if client is not None:
            client.close(timeout=5)


def outcome_of(future: "Future[Report]") -> Report:
    """The report of a future that is done; an executor's own failure becomes a report too."""
    try:
        return future.result(timeout=0)
    except CancelledError:
        return Report("stopped", "the executor gave the job back")
    except (OSError, TimeoutError) as error:
        return Report("share lost", f"the job did not come through ({error})")
    except Exception as error:
        logger.warning("a job ended with %s: %s", type(error).__name__, error)
        return Report("crashed", f"its supervisor ended with {type(error).__name__}")
