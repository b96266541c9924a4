"""One file per command. Each is imported only when its command is called."""
