"""The engine over a Dask cluster that is there already: the same pieces, the same results."""

from datetime import tzinfo
from typing import Any

from rtpaudit.errors import UnusableArguments
from rtpaudit.nightly.engine import AHEAD, Outcome
from rtpaudit.nightly.settings import AuditSettings
from rtpaudit.nightly.worker import Piece, Result, examine

CONNECT_S = 30


class DaskCluster:
    """Workers of a cluster, which see the sources under the same names as this machine."""

    def __init__(self, address: str, settings: AuditSettings, zone: tzinfo | None) -> None:
        try:
            import distributed
            from distributed.scheduler import KilledWorker
        except ImportError as fault:
            raise UnusableArguments("--cluster needs the extra cluster: pip install 'rtpaudit[cluster]'") from fault
        try:
            client: Any = distributed.Client
            self._client = client(address, timeout=CONNECT_S, set_as_default=False)
        except (OSError, ValueError, TimeoutError) as fault:
            raise UnusableArguments(f"--cluster {address}: no scheduler answers there ({fault})") from fault
        self._killed = KilledWorker
        self._settings = settings
        self._zone = zone
        self._pieces: dict[Any, Piece] = {}

    @property
    def room(self) -> int:
        """How many more pieces may be submitted now."""
        threads: int = sum(self._client.nthreads().values())
        return max(AHEAD * threads, 1) - len(self._pieces)

    def submit(self, piece: Piece) -> None:
        """Have a piece worked on; should its worker be lost, the scheduler gives it to another."""
        future = self._client.submit(_examine, piece, self._settings, self._zone, pure=False, retries=0)
        self._pieces[future] = piece

    def gather(self, timeout_s: float) -> list[Outcome]:
        """What is done by now, waiting for something as long as ``timeout_s``."""
        import distributed

        wait: Any = distributed.wait
        if not self._pieces:
            return []
        try:
            with self._client.as_current():
                done = wait(list(self._pieces), timeout=timeout_s, return_when="FIRST_COMPLETED").done
        except distributed.TimeoutError:
            return []
        return [self._take(future) for future in done]

    def close(self) -> None:
        """Take back what is still to be done, and leave the cluster to itself."""
        self._client.cancel(list(self._pieces))
        self._client.close()

    def _take(self, future: Any) -> Outcome:
        piece = self._pieces.pop(future)
        fault = future.exception()
        if fault is None:
            return Outcome(piece, future.result())
        if isinstance(fault, self._killed):
            return Outcome(piece, None, "ended several worker processes of the cluster")
        return Outcome(piece, None, f"{type(fault).__name__}: {fault}")


def _examine(piece: Piece, settings: AuditSettings, zone: tzinfo | None) -> Result:
    return examine(piece, settings, zone)
