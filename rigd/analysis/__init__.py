"""Pure numerics on arrays: un-mixing of spectra, residence times, kinetics. No file, device, clock or screen.

Importing this room costs numpy at most; scipy is imported by the functions that need it.
"""
