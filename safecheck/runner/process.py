"""The inside of a worker process: takes orders on its standard input, answers in lines of JSON.

Answers are JSON and not pickles: decoders read files from anywhere, and what they may do to this process must not be
able to run anything in the process that outlives it.
"""

from __future__ import annotations

import json
import os
import pickle
import queue
import signal
import threading
from dataclasses import dataclass
from pathlib import Path
from typing import Any, BinaryIO

from safecheck.evaluation import load_kernels
from safecheck.runner.faults import word_of
from safecheck.runner.standby import PREPARE
from safecheck.runner.tasks import Task
from safecheck.runner.worker import Opened, Treatment, perform

__all__ = ["Order", "main"]


@dataclass(frozen=True, slots=True)
class Order:
    """One task to perform."""

    task: Task
    lost: frozenset[int]
    """Positions of its frames under which workers died twice."""


def main() -> None:
    """Perform orders until the input ends."""
    orders = os.fdopen(os.dup(0), "rb")
    answers = os.fdopen(os.dup(1), "wb")
    _silence()
    inbox: queue.SimpleQueue[Any] = queue.SimpleQueue()
    threading.Thread(target=_listen, args=(orders, inbox, answers), daemon=True).start()
    first = inbox.get()
    if first == PREPARE:
        load_kernels()
        first = inbox.get()
    treatment, work = first
    opened = Opened.for_treatment(treatment)
    while True:
        _answer(answers, _carry_out(inbox.get(), treatment, work, answers, opened))


def _silence() -> None:
    """Keep what libraries print from the answers, and standard error, which holds warnings and logs, from anyone.

    Either may name a file or a patient. Ctrl-C is the parent's business.
    """
    nowhere = os.open(os.devnull, os.O_RDWR)
    for descriptor in (0, 1, 2):
        os.dup2(nowhere, descriptor)
    signal.signal(signal.SIGINT, signal.SIG_IGN)


def _listen(orders: BinaryIO, inbox: queue.SimpleQueue[Any], answers: BinaryIO) -> None:
    """Take orders; leave at once when the parent is gone, whatever is being done, since nobody waits for it."""
    try:
        while True:
            inbox.put(pickle.load(orders))
    except EOFError:
        pass
    except Exception as error:
        _answer(answers, {"unfit": type(error).__name__})
    finally:
        os._exit(0)


def _carry_out(order: Order, treatment: Treatment, work: Path, answers: BinaryIO, opened: Opened) -> dict[str, Any]:
    """Perform one order; what cannot be written is told by its system code, which holds no path."""
    try:
        done = perform(
            order.task, treatment, work, order.lost, lambda position: _answer(answers, {"begun": position}), opened
        )
    except OSError as error:
        return {"fault": word_of(error)}
    except Exception as error:
        return {"error": type(error).__name__}
    return {"refused": done.refused}


def _answer(answers: BinaryIO, message: dict[str, Any]) -> None:
    """Send one line."""
    answers.write(json.dumps(message).encode() + b"\n")
    answers.flush()
