"""The points of a plan on the workers of a dask.distributed scheduler. The only importer of dask, and only once a cluster is asked for."""

from __future__ import annotations

import asyncio
import contextlib
import importlib
import importlib.util
import logging
import re
import warnings
from collections.abc import Generator, Iterator
from concurrent.futures import ThreadPoolExecutor
from typing import TYPE_CHECKING

import pandas as pd

from sweep.base.errors import SurroundingsError, SweepError
from sweep.plan import Planned
from sweep.runner import remote
from sweep.runner.dispatch import STAYS, Dispatch, Note, Teller, Watch, whole
from sweep.study.model import Study

if TYPE_CHECKING:
    from distributed import Client

INSTALL = "pip install '.[cluster]' in a clone of the program, see the README"
_ADDRESS = re.compile(r"(?:(?P<scheme>[a-z]+)://)?(?P<host>[\w.-]+|\[[0-9a-fA-F:.%]+\]):(?P<port>\d{1,5})", re.ASCII)
_QUIET = ("distributed", "distributed.client")  # loggers that would write over the progress; what matters is said by the errors below


def checked_address(address: str) -> str:
    """Return an address with its scheme; SweepError where it is none, or dask is not installed."""
    found = _ADDRESS.fullmatch(address.strip())
    if not found or (found["scheme"] or "tcp") not in ("tcp", "tls") or not 0 < int(found["port"]) < 65_536:
        raise SweepError(f"--cluster: found {address!r}, expected tcp://HOST:PORT or tls://HOST:PORT, where a dask scheduler listens")
    if importlib.util.find_spec("distributed") is None:
        raise SweepError(f"--cluster: the package distributed is not installed; {INSTALL}")
    return f"{found['scheme'] or 'tcp'}://{found['host']}:{found['port']}"


def on_cluster(
    study: Study, plan: Planned, starts: list[int], size: int, address: str, tell: Teller | None = None, note: Note | None = None
) -> Generator[tuple[int, pd.DataFrame], None, None]:
    """Yield (start, table) of stretches of a plan of `size` rows from each of `starts`, each when it is whole.

    The tables are those of `in_order`. Close it where it is not read to its end. tell: told what a user should know; note: what belongs in
    the log. SurroundingsError where the cluster cannot be reached, has no workers or others than these versions, or goes away.
    """
    from distributed.client import FutureCancelledError
    from distributed.scheduler import KilledWorker

    address, say, log = checked_address(address), tell or (lambda _: None), note or (lambda **_: None)
    with _connected(address) as client:
        try:
            watch = Watch(client, address, patience(), _Greeter(client, say, log))
            watch.wait()
            say(f"cluster {address}: {_many(watch.workers, 'worker')}, {_many(watch.threads, 'thread')}")
            tables = Dispatch(client, watch, KilledWorker, study, plan, say, log).tables(starts, size)
            with contextlib.closing(tables):
                yield from whole(tables, starts, size, plan.size)
        except (OSError, RuntimeError, FutureCancelledError) as error:
            if isinstance(error, RuntimeError) and client.status == "running":
                raise  # by the program itself, on a worker
            raise SurroundingsError(f"the cluster at {address} went away: {_words(error)}; {STAYS}") from error


def patience() -> float:
    """Return how long (s) a scheduler, or a first worker, is waited for: dask's own time to connect."""
    import dask
    from dask.utils import parse_timedelta

    importlib.import_module("distributed")  # which makes its defaults known
    return float(parse_timedelta(dask.config.get("distributed.comm.timeouts.connect")))


@contextlib.contextmanager
def _connected(address: str) -> Iterator[Client]:
    """Connect to a scheduler, by certificates from dask's configuration where it speaks TLS; SurroundingsError where it cannot be reached."""
    import distributed
    from distributed.versions import VersionMismatchWarning

    with _quiet():
        try:
            _probe(address)
            with warnings.catch_warnings():
                warnings.simplefilter("ignore", VersionMismatchWarning)  # versions are compared below, and a difference ends the run
                client = distributed.Client(address, timeout=patience(), set_as_default=False)
        except (OSError, TypeError, RuntimeError, ValueError) as error:
            raise SurroundingsError(f"no cluster can be reached at {address}: {_words(error)}{_hint(address)}") from None
        try:
            yield client
        finally:
            with contextlib.suppress(Exception):
                client.close(timeout=5)


def _probe(address: str) -> None:
    """Raise what is wrong with an address: a client would wait for ever at a port that is not dask's, and complain when it goes."""
    from distributed.core import rpc
    from distributed.security import Security

    security = Security().get_connection_args("client")
    if address.startswith("tls:") and security.get("ssl_context") is None:
        raise ValueError("no certificates are given")

    async def ask() -> str:
        async with rpc(address, timeout=patience(), connection_args=security) as there:
            return str((await there.identity())["type"])

    with ThreadPoolExecutor(1) as thread:  # a caller may have an event loop of its own
        try:
            found = thread.submit(lambda: asyncio.run(asyncio.wait_for(ask(), patience() + 1.0))).result()
        except MemoryError:  # a greeting of another kind, read as the length of a message
            raise ValueError("what listens there is no dask scheduler") from None
    if found != "Scheduler":
        raise ValueError(f"a dask {found.lower()} listens there, not a scheduler")


@contextlib.contextmanager
def _quiet() -> Iterator[None]:
    """Silence what dask logs on this side."""
    levels = {logging.getLogger(name): logging.getLogger(name).level for name in _QUIET}
    for logger in levels:
        logger.setLevel(logging.CRITICAL)
    try:
        yield
    finally:
        for logger, level in levels.items():
            logger.setLevel(level)


def _hint(address: str) -> str:
    if address.startswith("tls:"):
        return "; certificates come from dask's configuration, distributed.comm.tls (see the README)"
    return "; start it with `dask scheduler`, and its workers with `dask worker`"


def _words(error: BaseException) -> str:
    return " ".join(str(error).split()) or ("no answer" if isinstance(error, TimeoutError) else type(error).__name__)


class _Greeter:
    """Compares workers with this machine: other versions are refused, another processor is told once."""

    def __init__(self, client: Client, say: Teller, note: Note) -> None:
        self.client, self.say, self.note = client, say, note
        self.processors = {remote.processor()}

    def __call__(self, workers: set[str]) -> set[str]:
        """Return the workers that answered; SurroundingsError, with what differs where, for other versions than here."""
        answers = self.client.run(remote.introduce, workers=sorted(workers), on_error="return")
        odd = []
        for worker, found in sorted(answers.items()):
            if isinstance(found, OSError):
                continue  # gone since
            if isinstance(found, BaseException):
                odd.append(f"{worker} cannot run the program ({_words(found)})")
            elif differs := remote.differences(remote.depends_on(), found[0]):
                odd.append(f"{worker} has {', '.join(differs)}")
            else:
                self._compare_processor(worker, found[1])
        if odd:
            more = f"; and {len(odd) - 3} more" if len(odd) > 3 else ""
            words = f"workers differ from this machine: {'; '.join(odd[:3])}{more}; install the same program and packages on all of them"
            raise SurroundingsError(words)
        return {worker for worker, found in answers.items() if not isinstance(found, OSError)}

    def _compare_processor(self, worker: str, found: str) -> None:
        self.note(what="worker", worker=worker, processor=found)
        if found not in self.processors:
            self.processors.add(found)
            self.say(f"{worker} has another processor ({found}; here {remote.processor()}): numbers agree to 1e-9 relative, not bit by bit")


def _many(count: int, noun: str) -> str:
    return f"{count} {noun}" if count == 1 else f"{count} {noun}s"
