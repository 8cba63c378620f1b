"""The terminal dashboard and the command line."""
