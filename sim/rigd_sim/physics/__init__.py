"""Equations with their sources, in SI, as plain functions and compiled kernels. No rig, no device, no chance, no
clock."""
