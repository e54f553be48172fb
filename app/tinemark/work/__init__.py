"""Jobs that run off the window's thread."""
