"""One file per verb of the command line, loaded when it is called."""
