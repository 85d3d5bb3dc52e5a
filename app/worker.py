"""What a worker process of a job does: take an item, answer with its outcome."""

from __future__ import annotations

import pickle
import signal
import traceback
from multiprocessing import connection

from core.errors import SweepbenchError


def work(line: connection.Connection) -> None:
    """What a worker does until its line ends, which it also does when the server is killed."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # Ctrl+C is for the server, which then ends the workers
    while True:
        try:
            line.send_bytes(_outcome(line.recv_bytes()))
        except (EOFError, OSError):
            return


def _outcome(message: bytes) -> bytes:
    # Errors travel as text: not every one survives pickling.
    try:
        function, arguments = pickle.loads(message)
        return pickle.dumps(("value", pickle.loads(function)(*arguments)))
    except SweepbenchError as error:
        return pickle.dumps(("sentence", str(error)))
    except Exception:  # anything else is a bug in the function, not in the pool
        return pickle.dumps(("bug", traceback.format_exc()))
