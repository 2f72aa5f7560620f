"""Values: what a rig, a recipe, a sample, an order and an event *are*.

Standard library only, frozen and slotted. Nothing here reads a file, a clock or a device; nothing decides.
House units (always the last word of a name): mL, mL_min, bar (gauge), degC, s; time is integer nanoseconds,
monotonic, ``*_ns``.
"""
