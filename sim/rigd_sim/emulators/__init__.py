"""Device side of the bench protocols (sim/MANUAL.md), byte by byte: what comes in, what goes out, and when.

Everything here is pure state: no port, no clock, no thread. Nothing here knows a driver.
"""
