"""The verbs of the command line, one module a group; each is imported only when it is called."""
