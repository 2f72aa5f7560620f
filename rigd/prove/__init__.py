"""Injects every fault of the simulator in every phase of a recipe and judges what the protection did by the true plant.

Rehearses through ``rigd.app``; never touches a rig. What it shows is true of the simulator under the faults it has, and
of nothing else.
"""
