"""The command line and the terminal views: the only room that prints."""
