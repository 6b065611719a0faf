"""Where batches are calculated: in this process, in a pool of processes, on a cluster, on whatever an executor stands for."""

from __future__ import annotations

import asyncio
import logging
import multiprocessing
import os
import re
import signal
import threading
from collections.abc import Callable, Iterable
from concurrent.futures import Executor, Future, ProcessPoolExecutor
from contextlib import suppress
from typing import Any

from leanloop.errors import MissingExtra, StudyError

NO_CLUSTER = 'a cluster needs dask.distributed; install the extra: pip install "leanloop[cluster]"'
REMEDY = "write the scheduler's address, tcp://HOST:PORT"
ADDRESS = re.compile(r"(?:(?:tcp|tls|ws|wss)://)?(?:[^\s:/\[\]]+|\[[^\s/\[\]]+\]):(\d{1,5})", re.ASCII)
PATIENCE = 10  # s
SETTLED = 10.0  # s that a pool gets to notice that its processes are ended
RETRIES = 5  # of a batch whose worker is lost, by the cluster itself


class Here(Executor):
    """Calculates in this process, at once."""

    def submit(self, fn: Callable[..., Any], /, *args: Any, **kwargs: Any) -> Future:
        """Call a function now and give its outcome as a future."""
        future: Future = Future()
        try:
            future.set_result(fn(*args, **kwargs))
        except Exception as error:  # noqa: BLE001 - as any executor, it hands on what it cannot judge
            future.set_exception(error)
        return future


class Engine:
    """An executor, how many batches to hand it at a time, and how to get another when it breaks.

    Parameters
    ----------
    make : callable
        Gives an executor.
    ahead : int
        Batches handed on and not yet back.
    own : bool
        Whether the executor is shut down at the end, and made anew where it breaks.
    """

    def __init__(self, make: Callable[[], Executor], ahead: int, own: bool = True) -> None:
        self.make, self.ahead, self.own = make, ahead, own
        self.executor = make()

    def submit(self, work: Callable[..., Any], *args: Any) -> Future:
        """Hand on a batch."""
        return self.executor.submit(work, *args)

    def alive(self) -> bool:
        """Tell whether what is handed on may still come back."""
        return True

    def forget(self, futures: Iterable[Future]) -> None:
        """Take back what is handed on and not begun; of an executor of our own, closing it does so."""
        if not self.own:
            for future in futures:
                with suppress(Exception):  # one that is no future, or of a cluster that is gone
                    future.cancel()

    def again(self) -> None:
        """Make a new executor in the place of a broken one of our own."""
        self.executor.shutdown(wait=False, cancel_futures=True)
        self.executor = self.make()

    def close(self, wait: bool = True) -> None:
        """Let go of the executor."""
        if self.own:
            self.executor.shutdown(wait=wait, cancel_futures=True)


def engine(executor: Executor | None = None, workers: int = 1, cluster: str | None = None) -> Engine:
    """Choose where batches are calculated.

    Parameters
    ----------
    executor : Executor, optional
        One of the caller's.
    workers : int
        Processes of a pool; 1 for none.
    cluster : str, optional
        Address of the scheduler of a cluster.

    Returns
    -------
    Engine

    Raises
    ------
    MissingExtra
        Where a cluster is asked for and its library is not installed.
    StudyError
        Where the cluster does not answer.
    """
    if executor is not None:
        return Engine(lambda: executor, 4 * (os.cpu_count() or 1), own=False)
    if cluster is not None:
        return _cluster(cluster)
    if workers < 1:
        raise StudyError(f"{workers} is no number of processes; give 1 or more")
    if workers > 1:
        return _Pool(lambda: ProcessPoolExecutor(workers, initializer=_begin), 2 * workers)
    return Engine(Here, 1)


class _Pool(Engine):
    """A pool of processes of our own."""

    def submit(self, work: Callable[..., Any], *args: Any) -> Future:
        """Hand on a batch; a process that is started for it hears no interrupt from its first moment."""
        if not hasattr(signal, "pthread_sigmask"):
            return super().submit(work, *args)
        mask = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
        try:
            return super().submit(work, *args)
        finally:
            signal.pthread_sigmask(signal.SIG_SETMASK, mask)

    def close(self, wait: bool = True) -> None:
        """Let go of the processes; without waiting, what they are at is lost."""
        processes = [] if wait else list((getattr(self.executor, "_processes", None) or {}).values())
        manager = getattr(self.executor, "_executor_manager_thread", None)
        super().close(wait)
        for process in processes:
            process.terminate()
        if not wait and manager is not None:  # else the interpreter, as it ends, may wake a thread that is just closing its pipe
            manager.join(SETTLED)


def _begin() -> None:
    """Leave an interrupt from the keyboard to the process that leads, and end when it does, however it ends."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    threading.Thread(target=_follow, daemon=True).start()


def _follow() -> None:
    multiprocessing.parent_process().join()
    os._exit(1)


class _Cluster(Engine):
    """A cluster that is there already: only the connection is ours."""

    def __init__(self, client: Any) -> None:
        self.client = client
        self.levels = _silenced()
        threads = sum(client.nthreads().values())
        super().__init__(lambda: client.get_executor(retries=RETRIES, pure=False), max(4, 4 * threads), own=False)

    def alive(self) -> bool:
        """Tell whether the scheduler is there, or is being looked for."""
        return self.client.status not in ("closing", "closed")

    def close(self, wait: bool = True) -> None:
        """Close the connection; the cluster goes on."""
        try:
            self.client.close()
        finally:
            for logger, level in self.levels.items():
                logger.setLevel(level)


def _silenced() -> dict[logging.Logger, int]:
    """Keep the library's logs, traces among them, off the screen: what matters comes back with the batches."""
    names = {*logging.root.manager.loggerDict, "tornado.application", "asyncio"}
    every = [logging.getLogger(name) for name in names if name.partition(".")[0] in ("distributed", "tornado", "asyncio")]
    levels = {logger: logger.level for logger in every}
    for logger in every:
        logger.setLevel(logging.CRITICAL)
    return levels


def _cluster(address: str) -> Engine:
    try:
        import distributed
    except ImportError as error:
        raise MissingExtra(NO_CLUSTER) from error
    found = ADDRESS.fullmatch(address)
    if not found or not 0 < int(found[1]) < 65536:  # the library itself waits long, and leaves a trace behind
        raise StudyError(f"cluster '{address}': is no address; {REMEDY}")
    try:
        asyncio.run(_greet(address))
        client = distributed.Client(address, timeout=f"{PATIENCE}s", set_as_default=False)
    except Exception as error:  # noqa: BLE001 - whatever it is, nobody there calculates
        reason = " ".join(str(error).split()) or f"nothing for {PATIENCE} s"
        raise StudyError(f"cluster {address}: does not answer: {reason}; {REMEDY}") from None
    return _Cluster(client)


async def _greet(address: str) -> None:
    """Ask the scheduler who it is, since a client that gets no proper answer waits for ever."""
    from distributed import Security
    from distributed.core import rpc

    words = Security().get_connection_args("client")
    async with asyncio.timeout(PATIENCE), rpc(address, connection_args=words, timeout=PATIENCE) as scheduler:
        if (await scheduler.identity()).get("type") != "Scheduler":
            raise ValueError("what answers there is no scheduler")
