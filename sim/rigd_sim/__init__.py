"""The simulated rig: physics < plant < faults | emulators < bench. Of the daemon it knows values and ports only."""
