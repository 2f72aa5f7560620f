"""A worker of a proof that was killed ends by itself."""

from __future__ import annotations

import multiprocessing
import os
import signal
import time
from multiprocessing.connection import Connection

from rigd.prove.branch import _end_if_alone


def work(told: Connection) -> None:
    while True:
        told.send(os.getpid())
        time.sleep(0.02)
        _end_if_alone()


def prove(told: Connection) -> None:
    worker = multiprocessing.get_context("fork").Process(target=work, args=(told,))
    worker.start()
    worker.join()


def test_a_worker_ends_when_its_proof_was_killed() -> None:
    told, telling = multiprocessing.Pipe(duplex=False)
    proof = multiprocessing.get_context("fork").Process(target=prove, args=(telling,))
    proof.start()
    telling.close()
    worker = told.recv()
    assert proof.pid is not None
    os.kill(proof.pid, signal.SIGKILL)
    proof.join()
    deadline = time.monotonic() + 20.0
    while time.monotonic() < deadline:
        try:
            told.recv()
        except EOFError:  # nobody holds the other end any more
            return
    os.kill(worker, signal.SIGKILL)
    raise AssertionError("the worker goes on")
