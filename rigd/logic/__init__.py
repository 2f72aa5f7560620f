"""Decisions: pure, deterministic, standard library only. No await, clock, chance, file or thread.

``protect`` judges signals, alarms and interlocks and runs the stops; ``conduct`` runs the recipe. Protect reads nothing
that conduct wrote. ``scan`` composes the two and ``arbitration`` decides who may command what.
"""
