"""Campaigns of dry runs: many nights with varied numbers, on all cores or a cluster, resumable, and what they say.

Runs rehearsals through ``rigd.app`` and keeps their results; never touches a rig, a driver or a live run.
"""
