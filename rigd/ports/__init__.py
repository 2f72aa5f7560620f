"""What the outside must offer: protocols only, no code that runs. Plug-ins see this room and ``rigd.model``."""
