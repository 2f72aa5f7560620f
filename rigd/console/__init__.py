"""The command line and the terminal views: the only room that prints. It decides nothing about the rig."""
