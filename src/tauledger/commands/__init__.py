"""One module a command: its arguments, and one function from them to the exit code."""
