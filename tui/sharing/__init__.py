"""A read-only view of a record for browsers: the web server, the process behind each view, and what it shows."""
