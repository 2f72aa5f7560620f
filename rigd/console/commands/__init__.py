"""One file per command, loaded only when it is called: reading arguments, calling the app, printing. No decisions."""
