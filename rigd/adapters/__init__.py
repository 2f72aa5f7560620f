"""One third-party library or operating-system facility per file, each behind a protocol of ``rigd.ports`` or a few
plain functions. Nothing here decides anything about a rig.
"""
