"""A real HTTP receiver in a thread: keeps what was posted; can be told to refuse or to be deaf."""

from __future__ import annotations

import contextlib
import json
import threading
import time
from collections.abc import Iterator
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from typing import Any


class Receiver:
    """``posts`` in order of arrival; ``refuse`` answers 503; ``deaf_s`` waits before each answer."""

    def __init__(self) -> None:
        self.posts: list[dict[str, Any]] = []
        self.refuse = False
        self.deaf_s = 0.0
        self.tries = 0
        receiver = self

        class Handler(BaseHTTPRequestHandler):
            def do_POST(self) -> None:
                body = self.rfile.read(int(self.headers["Content-Length"]))
                receiver.tries += 1
                time.sleep(receiver.deaf_s)
                if receiver.refuse:
                    self.send_response(503)
                else:
                    receiver.posts.append(json.loads(body))
                    self.send_response(200)
                self.end_headers()

            def log_message(self, *_: object) -> None:
                """Quiet."""

        self.server = ThreadingHTTPServer(("127.0.0.1", 0), Handler)
        self.port = self.server.server_address[1]


@contextlib.contextmanager
def web_hook() -> Iterator[Receiver]:
    """A receiver for the length of a test."""
    receiver = Receiver()
    thread = threading.Thread(target=receiver.server.serve_forever, daemon=True)
    thread.start()
    try:
        yield receiver
    finally:
        receiver.server.shutdown()
        receiver.server.server_close()
        thread.join()
