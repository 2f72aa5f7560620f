"""The parent process: lets control run while control proves that it scans, and stops the rig when it does not.

Standard library and pyserial only, no asyncio, no configuration, nothing to import that may break: the guard reads one
file (``plan.json``) that holds the exact bytes to send.
"""
