"""The simulated rig: physics < plant < faults | emulators < bench. Imports nothing of the daemon but values and ports."""
