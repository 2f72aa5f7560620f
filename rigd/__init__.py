"""rigd: runs a flow chemistry rig, stops it when it must, and turns the run into a decision.

Rooms, lowest first: ``model`` (values), ``logic`` (decisions), ``analysis`` (numerics), ``ports`` (what the
outside must offer), ``config`` (files people write), ``adapters`` (one library or facility each), ``runtime``
(the shells), ``guard`` (the parent process), ``front`` (what others hear and see), ``report``, ``app`` (knows
every concrete part), ``console`` (the command line). DEVELOPERS.md tells who may import whom.
"""

__version__ = "0.1.0"


def __getattr__(name: str) -> object:
    """``rigd.open_run(path)``: a recorded run for a notebook. Loaded when asked for: ``import rigd`` stays light."""
    if name == "open_run":
        from importlib import import_module

        return import_module("rigd.adapters.open_run").open_run
    raise AttributeError(f"module 'rigd' has no attribute {name!r}")
