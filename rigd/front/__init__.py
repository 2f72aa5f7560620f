"""What others hear: broker and alert channels. A client of the daemon's door like any other; it can never move a thing.

When this process dies, blocks or loses its broker, control does not notice.
"""
