"""What a run was, for people: the data of a journal put together, figures, the HTML page, the terminal summary.

Reads journals and files, writes reports. Knows no device, decides nothing, talks to no running daemon.
"""
