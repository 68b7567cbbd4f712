"""The processes beside a live night, and what keeps them going."""

import subprocess
import threading
import time
from pathlib import Path
from types import TracebackType
from typing import IO, Self

from orchestrator.children import start_child
from orchestrator.stream.broker import BrokerProcess, BrokerStartError, start_broker_process

_LOOK_EVERY_S = 0.5
_LONGEST_PAUSE_S = 30.0


class Beside:
    """The embedded broker and the analyst, started again whenever one has died.

    Neither is needed for the night: what fails here is counted, tried again after a growing
    pause, and never raised into it.
    """

    def __init__(self, rig: str, port: int = 0) -> None:
        self._rig = rig
        self._broker: BrokerProcess = start_broker_process(port)
        self.port = self._broker.port
        self._analyst = self._start_analyst()
        self._stopping = threading.Event()
        self.restarts = 0
        self._thread = threading.Thread(target=self._look_after, daemon=True)
        self._thread.start()

    @property
    def pids(self) -> dict[str, int]:
        """Process ids, for the record and for tests."""
        return {"broker": self._broker.pid, "analyst": self._analyst.pid}

    def _start_analyst(self) -> subprocess.Popen[bytes]:
        return start_child(
            "orchestrator.analysis.analyst",
            ["--broker", f"127.0.0.1:{self.port}", "--rig", self._rig],
        )

    def _look_after(self) -> None:
        pause_s = _LOOK_EVERY_S
        while not self._stopping.wait(pause_s):
            pause_s = _LOOK_EVERY_S
            try:
                if self._broker.process.poll() is not None:
                    self._broker = start_broker_process(self.port)
                    self.restarts += 1
                if self._analyst.poll() is not None:
                    self._analyst = self._start_analyst()
                    self.restarts += 1
            except (BrokerStartError, OSError):
                pause_s = min(_LONGEST_PAUSE_S, 4 * pause_s)

    def stop(self) -> None:
        """End both."""
        self._stopping.set()
        self._thread.join(timeout=30)
        end_process(self._analyst)
        self._broker.stop()

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.stop()


def end_process(process: subprocess.Popen[bytes], patience_s: float = 5.0) -> None:
    """Close a process's input, which asks it to end; kill it if it does not."""
    pipe: IO[bytes] | None = process.stdin
    if pipe is not None:
        pipe.close()
    try:
        process.wait(patience_s)
    except subprocess.TimeoutExpired:
        process.kill()
        process.wait()


def wait_for_file(path: Path, process: subprocess.Popen[bytes], patience_s: float = 30.0) -> bool:
    """Wait until a process has written a file; False if it ended or took too long."""
    end_s = time.monotonic() + patience_s
    while time.monotonic() < end_s and process.poll() is None:
        if path.exists():
            return True
        time.sleep(0.05)
    return False
