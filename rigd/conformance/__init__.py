"""The battery that every driver must pass, ours or a stranger's: shipped, so that ``python -m pytest`` runs it in any
package of drivers. Needs pytest, hypothesis and jsonschema (``pip install 'rigd[conformance]'``); never imported by the
daemon.

    from rigd.conformance import DriverCase, DriverContract

    class TestMyPump(DriverContract):
        case = DriverCase(family=FAMILY, spec=DeviceSpec(...), peer=MyPeer, ...)

``template/`` is the project that ``rigd driver new`` writes.
"""

import pytest

pytest.register_assert_rewrite("rigd.conformance.contract", "rigd.conformance.manners")

from rigd.conformance.bench import DriverCase, Peer  # noqa: E402 - asserts are only explained if asked for before
from rigd.conformance.contract import DriverContract  # noqa: E402

__all__ = ["DriverCase", "DriverContract", "Peer"]
