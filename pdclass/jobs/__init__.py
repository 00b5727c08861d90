"""One module a command: the function that the command calls."""
