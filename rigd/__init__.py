"""rigd: runs a flow chemistry rig, stops it when it must, and turns the run into a decision.

Rooms, lowest first: ``model`` (values), ``logic`` (decisions), ``analysis`` (numerics), ``ports`` (what the
outside must offer), ``config`` (files people write), ``adapters`` (one library or facility each), ``runtime``
(the shells), ``guard`` (the parent process), ``front`` (what others hear and see), ``report``, ``app`` (knows
every concrete part), ``console`` (the command line). DEVELOPERS.md tells who may import whom.
"""

__version__ = "0.1.0"
