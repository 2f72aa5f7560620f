"""Device drivers: one folder per family, found by the entry points ``rigd.drivers``.

A driver owns no port, no clock and no task, and never imports another family or the simulator. What families share is
beside their folders: ``checksums`` and ``bracket`` are pure, ``conversation`` and ``options`` are not.
"""
