"""The floor of the trip figure: a bare event loop that answers bytes on one terminal with bytes on another.

It asks every few milliseconds, as the daemon does, and sends a stop as long as the daemon's for whatever comes back.
Nothing is decoded, checked or decided.
"""

from __future__ import annotations

import asyncio
import os
import sys
import tty

ASK = b"{3101 read? p1 p2}0000\n"
STOP_FRAME = b"{1101 stop}0000\n"
PERIOD_s = 0.01


async def echo(asked_port: str, told_port: str, times: int) -> None:
    """Ask ``times`` times; each answer is echoed at once."""
    loop = asyncio.get_running_loop()
    asked, told = (os.open(port, os.O_RDWR | os.O_NOCTTY | os.O_NONBLOCK) for port in (asked_port, told_port))
    for descriptor in (asked, told):
        tty.setraw(descriptor)

    answered = asyncio.Event()

    def readable() -> None:
        if os.read(asked, 65536):
            os.write(told, STOP_FRAME)
            answered.set()

    loop.add_reader(asked, readable)
    for _ in range(times):
        answered.clear()
        os.write(asked, ASK)
        await answered.wait()
        await asyncio.sleep(PERIOD_s)
    loop.remove_reader(asked)
    os.close(asked)
    os.close(told)


if __name__ == "__main__":
    asyncio.run(echo(sys.argv[1], sys.argv[2], int(sys.argv[3])))
