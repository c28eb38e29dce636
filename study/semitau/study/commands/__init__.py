"""One module a command, each with `command`: imported only when that command is called."""
